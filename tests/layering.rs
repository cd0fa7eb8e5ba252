//! The layering rule: a module uses only modules that stand above it in `src/lib.rs`.

use std::fs;
use std::path::{Path, PathBuf};

/// The modules in the order of `src/lib.rs`.
fn order() -> Vec<String> {
    let lib = fs::read_to_string("src/lib.rs").expect("src/lib.rs");
    let name = |line: &str| Some(line.strip_prefix("pub mod ")?.strip_suffix(';')?.to_owned());
    lib.lines().filter_map(name).collect()
}

fn sources(dir: &Path, found: &mut Vec<PathBuf>) {
    for entry in fs::read_dir(dir).expect("a folder of sources") {
        let path = entry.expect("an entry").path();
        if path.is_dir() {
            sources(&path, found);
        } else if path.extension().is_some_and(|ext| ext == "rs") {
            found.push(path);
        }
    }
}

/// The top module that a file belongs to.
fn module_of(path: &Path) -> String {
    let inside = path.strip_prefix("src").expect("a path under src");
    let first = inside.iter().next().expect("a file name").to_string_lossy();
    first.trim_end_matches(".rs").to_owned()
}

/// Every top module named after `crate::` in a source, comments left out, grouped imports included.
fn used(source: &str) -> Vec<String> {
    let code: String = source
        .lines()
        .map(|line| line.split("//").next().unwrap_or_default())
        .collect::<Vec<_>>()
        .join("\n");
    let ident = |text: &str| -> String {
        text.chars()
            .take_while(|c| c.is_alphanumeric() || *c == '_')
            .collect()
    };
    let mut names = Vec::new();
    for (at, _) in code.match_indices("crate::") {
        let rest = &code[at + "crate::".len()..];
        match rest.strip_prefix('{') {
            Some(group) => names.extend(grouped(group).iter().map(|item| ident(item.trim()))),
            None => names.push(ident(rest)),
        }
    }
    names
}

/// The items at the first level of `a, b::{c, d}, e} ...`.
fn grouped(group: &str) -> Vec<String> {
    let (mut depth, mut items) = (0, vec![String::new()]);
    for c in group.chars() {
        match c {
            '{' => depth += 1,
            '}' if depth == 0 => break,
            '}' => depth -= 1,
            ',' if depth == 0 => items.push(String::new()),
            _ => items.last_mut().expect("never empty").push(c),
        }
    }
    items
}

#[test]
fn a_module_uses_only_modules_above_it() {
    let order = order();
    assert!(
        order.len() > 8,
        "lib.rs lists its modules one a line: {order:?}"
    );
    let rank = |name: &str| order.iter().position(|module| module == name);
    let mut files = Vec::new();
    sources(Path::new("src"), &mut files);
    let mut wrong = Vec::new();
    for path in files
        .iter()
        .filter(|path| !path.ends_with("lib.rs") && !path.ends_with("main.rs"))
    {
        let own = rank(&module_of(path)).unwrap_or_else(|| panic!("{path:?} is in no module"));
        for name in used(&fs::read_to_string(path).expect("a source")) {
            if rank(&name).is_none_or(|other| other > own) {
                wrong.push(format!("{} uses {name}", path.display()));
            }
        }
    }
    assert!(
        wrong.is_empty(),
        "these look down or past the list: {wrong:#?}"
    );
}

#[test]
fn the_check_sees_grouped_and_nested_imports() {
    let source =
        "use crate::{belt::{Part, View}, page};\nlet x = crate::cli::run(); // crate::nothing";
    assert_eq!(used(source), ["belt", "page", "cli"]);
}
