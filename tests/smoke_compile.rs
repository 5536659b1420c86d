//! The example plans compile.
#[test]
fn wrist() {
    let bytes = std::fs::read("plans/wrist-study.yaml").unwrap();
    let compilation = aforesaid::plan::checked::compile("plans/wrist-study.yaml", &bytes);
    println!("{}", aforesaid::text::render::to_text(&compilation.findings, false));
    let plan = compilation.plan.unwrap();
    println!("{}", String::from_utf8_lossy(plan.resolved_bytes()));
    let ex = std::fs::read("/tmp/example.yaml").unwrap();
    let compilation = aforesaid::plan::checked::compile("example.yaml", &ex);
    println!("{}", aforesaid::text::render::to_text(&compilation.findings, false));
}
