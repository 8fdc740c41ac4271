//! The import table of `src/lib.rs`: a module imports only what stands above it.
//!
//! Every `crate::name` and every `super::` path in `src/` is followed to the module it means. Text
//! that only speaks of a module (comments, documentation, strings) counts as nothing.

use std::collections::BTreeSet;
use std::path::{Path, PathBuf};

/// Each module may import those before it; `main.rs` and `lib.rs` see all of them.
///
/// `math` and `units` need nothing of each other: [`APART`] keeps it so.
const ORDER: [&str; 17] = [
    "math",
    "units",
    "input",
    "stage",
    "orbit",
    "design",
    "map",
    "signal",
    "drive",
    "transmit",
    "metrics",
    "limits",
    "verdict",
    "predistort",
    "study",
    "report",
    "cli",
];

/// The two that stand side by side.
const APART: [&str; 2] = ["math", "units"];

/// An import of a module that does not stand above the importing one.
#[derive(Debug, PartialEq, Eq)]
struct Breach {
    file: PathBuf,
    line: usize,
    from: String,
    to: String,
}

/// The modules that lead from the crate's root to what `file` holds: `src/map/read.rs` is `[map, read]`.
fn module_of(file: &Path) -> Vec<String> {
    let mut parts: Vec<String> = file
        .with_extension("")
        .iter()
        .skip_while(|part| *part != "src")
        .skip(1)
        .map(|part| part.to_string_lossy().into_owned())
        .collect();
    if parts.last().is_some_and(|last| last == "mod") {
        parts.pop();
    }
    parts
}

/// `text` without comments and without what stands in string literals, line for line.
fn code_of(text: &str) -> String {
    let mut code = String::with_capacity(text.len());
    let mut rest = text.chars().peekable();
    let keep_line = |code: &mut String, c: char| {
        if c == '\n' {
            code.push('\n');
        }
    };
    while let Some(c) = rest.next() {
        match (c, rest.peek()) {
            ('/', Some('/')) => {
                while rest.peek().is_some_and(|c| *c != '\n') {
                    rest.next();
                }
            }
            ('/', Some('*')) => {
                let mut last = ' ';
                for c in rest.by_ref() {
                    keep_line(&mut code, c);
                    if last == '*' && c == '/' {
                        break;
                    }
                    last = c;
                }
            }
            ('\'', Some('"')) => {
                rest.next();
            }
            ('"', _) => {
                let mut escaped = false;
                for c in rest.by_ref() {
                    keep_line(&mut code, c);
                    if c == '"' && !escaped {
                        break;
                    }
                    escaped = c == '\\' && !escaped;
                }
            }
            _ => code.push(c),
        }
    }
    code
}

/// The words of `line` that follow `start`, which begins a path: the first name of each path, or of
/// each path in braces.
fn names_after(code: &str, start: usize) -> Vec<String> {
    let word = |text: &str| -> String {
        text.trim_start()
            .chars()
            .take_while(|c| c.is_alphanumeric() || *c == '_')
            .collect()
    };
    let rest = &code[start..];
    let Some(inside) = rest.strip_prefix('{') else {
        return vec![word(rest)];
    };
    // Only the names at the first level of the braces.
    let (mut depth, mut names, mut at) = (0, Vec::new(), 0);
    for (index, c) in inside.char_indices() {
        match c {
            '{' => depth += 1,
            '}' if depth == 0 => {
                names.push(word(&inside[at..index]));
                break;
            }
            '}' => depth -= 1,
            ',' if depth == 0 => {
                names.push(word(&inside[at..index]));
                at = index + 1;
            }
            _ => {}
        }
    }
    names.retain(|name| !name.is_empty());
    names
}

/// Every import in `text`, the content of `file`, that breaks the table.
fn breaches(file: &Path, text: &str) -> Vec<Breach> {
    let module = module_of(file);
    let Some(from) = module.first().cloned() else {
        return Vec::new();
    };
    let rank = |name: &str| ORDER.iter().position(|known| *known == name);
    let Some(own_rank) = rank(&from) else {
        return if ["lib", "main"].contains(&from.as_str()) {
            Vec::new()
        } else {
            vec![Breach {
                file: file.to_owned(),
                line: 1,
                from: from.clone(),
                to: "a place in the table".to_owned(),
            }]
        };
    };
    let code = code_of(text);
    let line_of = |at: usize| code[..at].matches('\n').count() + 1;
    let mut found = Vec::new();
    let mut check = |at: usize, to: &str| {
        let beside = APART.contains(&to) && APART.contains(&from.as_str());
        if to != from && (beside || rank(to).is_none_or(|rank| rank >= own_rank)) {
            found.push(Breach {
                file: file.to_owned(),
                line: line_of(at),
                from: from.clone(),
                to: to.to_owned(),
            });
        }
    };
    for (at, path) in code.match_indices("crate::") {
        for name in names_after(&code, at + path.len()) {
            check(at, &name);
        }
    }
    // `super::` as often as the module is deep reaches the crate's root. Modules written inside the
    // file (tests) are one deeper, so that a path is followed from the file's own depth and one more.
    let mut at = 0;
    while let Some(step) = code[at..].find("super::") {
        let start = at + step;
        let mut end = start;
        let mut ups = 0;
        while code[end..].starts_with("super::") {
            end += "super::".len();
            ups += 1;
        }
        let inner = usize::from(in_inner_module(&code, start));
        if ups == module.len() + inner {
            for name in names_after(&code, end) {
                check(start, &name);
            }
        }
        at = end;
    }
    found
}

/// True where an open `mod name {` stands before `at`.
fn in_inner_module(code: &str, at: usize) -> bool {
    code[..at].match_indices("mod ").any(|(start, _)| {
        let head = code[start..at].split(['{', ';']).next().unwrap_or("");
        let body = &code[start + head.len()..at];
        body.starts_with('{')
            && body.chars().fold(0i64, |depth, c| match c {
                '{' => depth + 1,
                '}' => depth - 1,
                _ => depth,
            }) > 0
    })
}

fn files_under(folder: &Path) -> Vec<PathBuf> {
    let mut files = Vec::new();
    for entry in std::fs::read_dir(folder).unwrap() {
        let path = entry.unwrap().path();
        if path.is_dir() {
            files.extend(files_under(&path));
        } else if path.extension().is_some_and(|extension| extension == "rs") {
            files.push(path);
        }
    }
    files.sort();
    files
}

fn source() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("src")
}

#[test]
fn every_module_imports_only_what_stands_above_it() {
    let root = Path::new(env!("CARGO_MANIFEST_DIR"));
    let mut found = Vec::new();
    let mut modules = BTreeSet::new();
    for file in files_under(&source()) {
        let short = file.strip_prefix(root).unwrap();
        modules.extend(module_of(short).into_iter().next());
        found.extend(breaches(short, &std::fs::read_to_string(&file).unwrap()));
    }
    assert!(found.is_empty(), "{found:#?}");
    // The walk reached the modules that the table is about.
    for module in ["math", "stage", "orbit", "metrics", "cli"] {
        assert!(modules.contains(module), "no file of {module} was read");
    }
}

#[test]
fn only_the_command_line_touches_the_outside() {
    let outside = [
        "std::fs",
        "File::open",
        "std::env",
        "println!",
        "eprintln!",
        "print!(",
        "std::process",
        "io::stdout",
        "io::stderr",
        "io::stdin",
    ];
    for file in files_under(&source()) {
        let module = module_of(file.strip_prefix(env!("CARGO_MANIFEST_DIR")).unwrap());
        if ["cli", "main"].contains(&module[0].as_str()) {
            continue;
        }
        let text = std::fs::read_to_string(&file).unwrap();
        // Tests inside a module may read the repository's own files.
        let code = code_of(text.split("#[cfg(test)]").next().unwrap());
        if file.ends_with("tests.rs") || file.iter().any(|part| part == "tests") {
            continue;
        }
        for word in outside {
            assert!(!code.contains(word), "{}: {word}", file.display());
        }
    }
}

#[test]
fn the_table_is_that_of_the_crate() {
    let text = std::fs::read_to_string(source().join("lib.rs")).unwrap();
    for line in text.lines() {
        if let Some(name) = line.strip_prefix("pub mod ") {
            let name = name.trim_end_matches(';');
            assert!(ORDER.contains(&name), "{name} has no place in the table");
        }
    }
}

#[test]
fn breaches_are_seen_wherever_they_hide() {
    let breach = |file: &str, text: &str| -> Vec<(usize, String)> {
        breaches(Path::new(file), text)
            .into_iter()
            .map(|breach| (breach.line, breach.to))
            .collect()
    };
    let limits = |line| vec![(line, "limits".to_owned())];
    assert_eq!(
        breach("src/metrics/welch.rs", "\nuse crate::limits::Mask;\n"),
        limits(2)
    );
    assert_eq!(
        breach(
            "src/metrics/mod.rs",
            "use crate::{math::Window, units,\n limits::{Mask, rows}};"
        ),
        limits(1)
    );
    assert_eq!(
        breach(
            "src/metrics/welch.rs",
            "fn f() { let _ = \"a // \"; crate::limits::of(1) }"
        ),
        limits(1)
    );
    assert_eq!(
        breach("src/metrics/welch.rs", "use super::super::limits::Mask;"),
        limits(1)
    );
    assert_eq!(
        breach("src/metrics/mod.rs", "use super::limits::Mask;"),
        limits(1)
    );
    assert_eq!(
        breach(
            "src/metrics/mod.rs",
            "mod tests {\n use super::super::limits::Mask; }"
        ),
        limits(2)
    );
    assert_eq!(breach("src/units.rs", "use crate::input::Files;").len(), 1);
    assert_eq!(breach("src/units.rs", "use crate::math::db;").len(), 1);
    assert_eq!(breach("src/stray/mod.rs", "").len(), 1);

    for (file, text) in [
        (
            "src/metrics/welch.rs",
            "use crate::math::Window;\nuse super::limits;",
        ),
        (
            "src/metrics/welch.rs",
            "// crate::limits::Mask\n/* crate::cli::main */ \"crate::limits\"",
        ),
        (
            "src/verdict/mod.rs",
            "use crate::{limits::Mask, metrics, units};",
        ),
        ("src/verdict/mod.rs", "use crate::verdict::judge::Judge;"),
        ("src/lib.rs", "pub use crate::cli::main;"),
    ] {
        assert_eq!(breach(file, text), vec![], "{text}");
    }
}
