//! Texts that are compared with a file, byte for byte.

use std::fs;
use std::path::Path;

/// Holds `text` against `tests/golden/NAME`; with `AFORESAID_UPDATE_GOLDEN=1` writes it there instead.
///
/// # Panics
/// Where the two differ, with the first line that does.
pub fn check(name: &str, text: &str) {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/golden").join(name);
    if std::env::var_os("AFORESAID_UPDATE_GOLDEN").is_some_and(|value| value == "1") {
        fs::create_dir_all(path.parent().expect("a golden file lies in a folder")).expect("the folder can be made");
        fs::write(&path, text).expect("the golden file can be written");
        return;
    }
    let kept = fs::read_to_string(&path)
        .unwrap_or_else(|error| panic!("{}: {error}; run the test with AFORESAID_UPDATE_GOLDEN=1 and read what it writes", path.display()));
    if kept != text {
        let line = kept.lines().zip(text.lines()).take_while(|(one, other)| one == other).count();
        let [kept, text] = [kept.as_str(), text].map(|all| all.lines().nth(line).unwrap_or("(end of text)").to_owned());
        panic!("{} differs at line {}:\n  kept: {kept}\n  now:  {text}", path.display(), line + 1);
    }
}
