//! Every plan in `plans/` compiles without a finding, and says that it is invented.

use aforesaid::plan::checked::compile;
use aforesaid::text::render::to_text;
use std::path::Path;

#[test]
fn every_example_can_be_sealed() {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("plans");
    let mut count = 0;
    for entry in std::fs::read_dir(folder).unwrap() {
        let path = entry.unwrap().path();
        let text = std::fs::read(&path).unwrap();
        assert!(String::from_utf8_lossy(&text).contains("nvented"), "{}", path.display());
        let compilation = compile("plan.yaml", &text);
        assert!(compilation.findings.is_empty(), "{}:\n{}", path.display(), to_text(&compilation.findings, false));
        count += 1;
    }
    assert!(count >= 2);
}
