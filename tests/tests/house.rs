//! The house of the project, enforced by reading it: who imports whom, where unsafe code may stand, what lies at the top.

use std::collections::BTreeSet;
use std::path::{Path, PathBuf};

use neap_tests::house::{HOUSE, TOP_LEVEL, has_word, imports, trespasses};
use neap_tests::top_level;

fn sources(folder: &Path) -> Vec<PathBuf> {
    let mut out = Vec::new();
    for entry in std::fs::read_dir(folder).unwrap_or_else(|cause| panic!("{}: {cause}", folder.display())) {
        let path = entry.expect("an entry").path();
        if path.is_dir() {
            out.extend(sources(&path));
        } else if path.extension().is_some_and(|extension| extension == "rs") {
            out.push(path);
        }
    }
    out.sort();
    out
}

/// The path of a file's module below the crate's root.
fn home(file: &Path, root: &Path) -> Vec<String> {
    let below = file.strip_prefix(root).expect("it lies below the root").with_extension("");
    let mut parts: Vec<String> = below.iter().map(|part| part.to_string_lossy().into_owned()).collect();
    if parts.last().is_some_and(|last| last == "mod" || last == "lib" || last == "main") {
        parts.pop();
    }
    parts
}

fn read(file: &Path) -> String {
    std::fs::read_to_string(file).unwrap_or_else(|cause| panic!("{}: {cause}", file.display()))
}

#[test]
fn modules_import_only_from_those_above_them() {
    let root = top_level().join("engine/src");
    let mut wrong = String::new();
    let mut seen = BTreeSet::new();
    for file in sources(&root) {
        let home = home(&file, &root);
        let home: Vec<&str> = home.iter().map(String::as_str).collect();
        let Some(module) = home.first() else {
            assert_eq!(imports(&read(&file), &home), Vec::<String>::new(), "lib.rs only declares");
            continue;
        };
        seen.insert((*module).to_owned());
        wrong += &trespasses(&read(&file), &home);
    }
    assert!(wrong.is_empty(), "{wrong}");
    let house: BTreeSet<String> = HOUSE.iter().flat_map(|row| row.iter()).map(|name| (*name).to_owned()).collect();
    assert_eq!(seen, house, "every module of the house is there, and no other");
}

#[test]
fn modules_are_declared_in_the_order_of_the_house() {
    let root = read(&top_level().join("engine/src/lib.rs"));
    let row_of = |name: &str| HOUSE.iter().position(|row| row.contains(&name)).expect("a module of the house");
    let rows: Vec<usize> = root
        .lines()
        .filter_map(|line| line.strip_prefix("pub mod "))
        .map(|rest| row_of(rest.trim_end_matches(';')))
        .collect();
    assert!(rows.is_sorted(), "lib.rs declares rows {rows:?}");
}

#[test]
fn mathematics_imports_nothing_of_the_house() {
    let root = top_level().join("engine/src");
    for file in sources(&root.join("math")) {
        let home = home(&file, &root);
        let home: Vec<&str> = home.iter().map(String::as_str).collect();
        let imports: Vec<String> = imports(&read(&file), &home).into_iter().filter(|name| name != "math").collect();
        assert!(imports.is_empty(), "{} imports {imports:?}", file.display());
    }
}

#[test]
fn unsafe_code_stands_in_the_kernels_only() {
    let top = top_level();
    let kernel = top.join("engine/src/math/kernel");
    for folder in ["engine", "cli", "tests"] {
        for file in sources(&top.join(folder)) {
            if !file.starts_with(&kernel) {
                assert!(!has_word(&read(&file), "unsafe"), "{} has unsafe code", file.display());
            }
        }
    }
}

#[test]
fn the_engine_has_no_terminal_no_pool_and_no_handler() {
    let top = top_level();
    let manifest = read(&top.join("engine/Cargo.toml"));
    let dependencies = manifest.split("[dev-dependencies]").next().expect("a first part");
    for name in ["annotate-snippets", "clap", "ctrlc", "indicatif"] {
        assert!(!dependencies.contains(name), "the engine depends on {name}");
    }
    for file in sources(&top.join("engine/src")) {
        let text = read(&file);
        for word in ["println", "eprintln", "stdout", "stderr"] {
            assert!(!has_word(&text, word), "{} names {word}", file.display());
        }
    }
}

#[test]
fn the_command_line_imports_the_engine_and_no_other_member() {
    let manifest = read(&top_level().join("cli/Cargo.toml"));
    let members: Vec<&str> = manifest.lines().filter(|line| line.starts_with("neap")).collect();
    assert_eq!(members, ["neap-engine.workspace = true"]);
}

/// Names that `.gitignore` lists at the top level are left out: a run leaves its folder where it was started.
#[test]
fn the_top_level_holds_only_what_the_house_has() {
    let ignored = read(&top_level().join(".gitignore"));
    let ignored: Vec<&str> = ignored.lines().map(|line| line.trim_matches('/')).collect();
    let matches = |name: &str, pattern: &str| match pattern.strip_prefix('*') {
        Some(end) => name.ends_with(end),
        None => name == pattern,
    };
    for entry in std::fs::read_dir(top_level()).expect("the top level can be read") {
        let name = entry.expect("an entry").file_name().to_string_lossy().into_owned();
        let known = TOP_LEVEL.contains(&name.as_str()) || name.starts_with('.');
        assert!(known || ignored.iter().any(|pattern| matches(&name, pattern)), "`{name}` at the top level");
    }
}

/// The pages that people read name what there is.
#[test]
fn the_pages_name_every_module_table_and_column() {
    let developers = read(&top_level().join("DEVELOPERS.md"));
    for module in HOUSE.iter().flat_map(|row| row.iter()) {
        assert!(developers.contains(&format!("\n| `{module}` |")), "DEVELOPERS.md says nothing of {module}");
    }
    let readme = read(&top_level().join("README.md"));
    for table in neap_engine::tables::TABLES {
        let start = format!("| `{}` |", table.file);
        let line = readme.lines().find(|line| line.starts_with(&start));
        let line = line.unwrap_or_else(|| panic!("README.md says nothing of {}", table.file));
        for column in table.columns {
            // Errors and bounds of shares are described together.
            let stem = ["_se", "_mc_lower", "_mc_upper"].iter().find_map(|end| column.name.strip_suffix(end));
            let name = stem.filter(|_| table.file == "shares.parquet").unwrap_or(column.name);
            assert!(line.contains(name), "README.md: {} has a column {}", table.file, column.name);
        }
    }
    for command in ["cargo run --release -- run scenarios/first-arm.toml", "cargo test --workspace --release"] {
        assert!(readme.contains(command));
    }
    for caution in neap_engine::tables::CAUTIONS {
        assert!(readme.replace('`', "").contains(caution), "README.md lacks: {caution}");
    }
}

/// The checks above can fail: each of these trespasses is found.
#[test]
fn a_trespass_is_found() {
    let found = |text: &str, home: &[&str]| !trespasses(text, home).is_empty();
    assert!(found("use crate::run::Results;", &["plan"]));
    assert!(found("use crate::{math::exp, summary::Ranks};", &["kinetics", "step"]));
    assert!(found("fn f() -> crate::scenario::Role { loop {} }", &["math", "exp"]));
    assert!(found("use super::super::run;", &["plan", "memory"]));
    assert!(found("use super::run;", &["plan"]));
    assert!(found("mod tests { use super::super::super::run::Watch; }", &["plan", "memory"]));
    assert!(found("use crate::cli;", &["tables"]));
    assert!(found("use crate::*;", &["tables"]));
    assert!(found("", &["drafts"]));

    assert!(!found("use crate::{math::{exp, ln}, quantity::Exact};", &["scenario"]));
    assert!(!found("use super::super::Plan;", &["plan", "a", "b"]));
    assert!(!found("mod tests { use super::super::wilson; }", &["summary", "ranks"]));
    assert!(!found("// use crate::run;\n/* crate::run /* */ crate::run */ const A: &str = \"crate::run\";", &["math"]));
    assert!(!found("const A: &str = r#\"\"crate::run\"\"#; const B: char = '\"'; const C: char = '\\'';", &["math"]));
    assert!(!found("use crate::diagnostic::Fault;", &["plan"]));
}

#[test]
fn the_word_unsafe_is_found_in_code_only() {
    assert!(has_word("fn f() { unsafe { g() } }", "unsafe"));
    assert!(!has_word("// unsafe\n#[expect(unsafe_code)] const A: &str = \"unsafe\";", "unsafe"));
}

#[test]
fn imports_are_found_in_every_form() {
    let text = "use crate::{a, b::{c, d as e}, f::*}; fn g<'x>(h: &'x crate::i::J) -> crate::k { 'y' }";
    assert_eq!(imports(text, &["run"]), ["a", "b", "f", "i", "k"]);
}
