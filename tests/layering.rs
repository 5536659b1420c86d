//! Who may import whom, read from the sources: `use` trees and inline paths alike. No module re-exports another's items.

use std::collections::{BTreeMap, BTreeSet};
use std::path::{Path, PathBuf};
use syn::visit::Visit;

/// The corridor. `conduct` is one run from bound data to the files of its record, shared by the command line and the audit.
const MAY_IMPORT: &[(&str, &[&str])] = &[
    ("canon", &[]),
    ("text", &[]),
    ("stats", &[]),
    ("world", &[]),
    ("plan", &["canon", "text"]),
    ("data", &["canon", "text", "plan"]),
    ("results", &["canon", "stats"]),
    ("execute", &["canon", "plan", "data", "stats", "results"]),
    ("record", &["canon", "text", "plan", "results", "world"]),
    ("report", &["canon", "text", "plan", "results"]),
    ("conduct", &["canon", "plan", "data", "results", "execute", "record", "report"]),
    ("audit", &["canon", "text", "plan", "data", "stats", "results", "execute", "record", "report", "conduct", "world"]),
    ("cli", &["canon", "text", "plan", "data", "stats", "results", "execute", "record", "report", "conduct", "audit", "world"]),
];

/// Only `world` touches files, clock, environment and terminal.
const OUTSIDE: &[&str] = &["fs", "env", "process", "net"];

#[derive(Default)]
struct Paths {
    /// Every path that starts with `crate`, and every one that starts with `std`.
    found: Vec<Vec<String>>,
    re_exports: Vec<Vec<String>>,
}

impl Paths {
    fn tree(&mut self, tree: &syn::UseTree, before: &mut Vec<String>, public: bool) {
        match tree {
            syn::UseTree::Path(path) => {
                before.push(path.ident.to_string());
                self.tree(&path.tree, before, public);
                before.pop();
            }
            syn::UseTree::Group(group) => group.items.iter().for_each(|item| self.tree(item, before, public)),
            syn::UseTree::Name(name) => self.end(name.ident.to_string(), before, public),
            syn::UseTree::Rename(rename) => self.end(rename.ident.to_string(), before, public),
            syn::UseTree::Glob(_) => self.end("*".to_owned(), before, public),
        }
    }

    fn end(&mut self, last: String, before: &[String], public: bool) {
        let mut path = before.to_vec();
        path.push(last);
        if public {
            self.re_exports.push(path.clone());
        }
        self.found.push(path);
    }
}

impl<'ast> Visit<'ast> for Paths {
    fn visit_item_use(&mut self, item: &'ast syn::ItemUse) {
        let public = matches!(item.vis, syn::Visibility::Public(_));
        self.tree(&item.tree, &mut Vec::new(), public);
    }

    fn visit_path(&mut self, path: &'ast syn::Path) {
        self.found.push(path.segments.iter().map(|segment| segment.ident.to_string()).collect());
        syn::visit::visit_path(self, path);
    }
}

fn sources(folder: &Path, found: &mut Vec<PathBuf>) {
    let mut entries: Vec<PathBuf> = std::fs::read_dir(folder).unwrap().map(|entry| entry.unwrap().path()).collect();
    entries.sort();
    for path in entries {
        if path.is_dir() {
            sources(&path, found);
        } else if path.extension().is_some_and(|extension| extension == "rs") {
            found.push(path);
        }
    }
}

/// Every source with the module of the corridor that it belongs to.
fn by_module() -> BTreeMap<PathBuf, (String, Paths)> {
    let root = Path::new(env!("CARGO_MANIFEST_DIR")).join("src");
    let mut files = Vec::new();
    sources(&root, &mut files);
    files
        .into_iter()
        .map(|path| {
            let inside = path.strip_prefix(&root).unwrap();
            let module = inside.components().next().unwrap().as_os_str().to_string_lossy().trim_end_matches(".rs").to_owned();
            let mut paths = Paths::default();
            paths.visit_file(&syn::parse_file(&std::fs::read_to_string(&path).unwrap()).unwrap());
            (inside.to_path_buf(), (module, paths))
        })
        .collect()
}

#[test]
fn every_module_imports_only_what_the_corridor_lets_it() {
    let allowed: BTreeMap<&str, BTreeSet<&str>> =
        MAY_IMPORT.iter().map(|(module, others)| (*module, others.iter().copied().collect())).collect();
    let mut broken = Vec::new();
    for (file, (module, paths)) in by_module() {
        if module == "lib" || module == "main" {
            continue;
        }
        let others = allowed.get(module.as_str()).unwrap_or_else(|| panic!("{} is in no module of the corridor", file.display()));
        for path in paths.found.iter().filter(|path| path.len() > 1 && path[0] == "crate") {
            let other = path.get(1).map_or("", String::as_str);
            if other != module && !others.contains(other) {
                broken.push(format!("{}: {module} imports {}", file.display(), path.join("::")));
            }
        }
    }
    assert!(broken.is_empty(), "{}", broken.join("\n"));
}

#[test]
fn only_world_touches_the_outside() {
    let mut broken = Vec::new();
    for (file, (module, paths)) in by_module() {
        if module == "world" || module == "main" {
            continue;
        }
        for path in &paths.found {
            let touches = path.len() > 1 && path[0] == "std" && OUTSIDE.contains(&path[1].as_str());
            let clock = path.iter().any(|part| part == "SystemTime" || part == "Instant");
            if touches || clock {
                broken.push(format!("{}: {}", file.display(), path.join("::")));
            }
        }
    }
    assert!(broken.is_empty(), "{}", broken.join("\n"));
}

#[test]
fn no_module_re_exports_another() {
    for (file, (module, paths)) in by_module() {
        for path in paths.re_exports.iter().filter(|path| path[0] == "crate") {
            assert!(path.get(1) == Some(&module), "{}: {} is re-exported", file.display(), path.join("::"));
        }
    }
}

#[test]
fn no_source_is_longer_than_600_lines() {
    let root = Path::new(env!("CARGO_MANIFEST_DIR")).join("src");
    let mut files = Vec::new();
    sources(&root, &mut files);
    for path in files {
        let lines = std::fs::read_to_string(&path).unwrap().lines().count();
        let most = if path.components().any(|part| part.as_os_str() == "rules") { 150 } else { 600 };
        assert!(lines <= most, "{} has {lines} lines: is there more than one idea in it?", path.display());
    }
}
