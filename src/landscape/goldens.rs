//! Golden files: what each mistake looks like, and the terms that correct problems become. `BLESS=1` rewrites them.

use std::collections::BTreeSet;
use std::path::{Path, PathBuf};

use super::{check, mistake};
use crate::language::{parse, render};

fn problems(folder: &str) -> Vec<PathBuf> {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/landscape").join(folder);
    let entries = std::fs::read_dir(&folder).unwrap().map(|entry| entry.unwrap().path());
    let mut files: Vec<PathBuf> = entries.filter(|path| path.extension().is_some_and(|end| end == "land")).collect();
    files.sort();
    assert!(!files.is_empty());
    files
}

fn compare(problem: &Path, found: &str) {
    let golden = problem.with_extension("txt");
    if std::env::var_os("BLESS").is_some() {
        std::fs::write(&golden, found).unwrap();
    }
    let expected = std::fs::read_to_string(&golden).unwrap_or_default();
    assert_eq!(found, expected, "{} differs; BLESS=1 rewrites it", golden.display());
}

/// Every variant of the enum, read from its own source, so that a new one without a golden file fails here.
fn variants() -> BTreeSet<String> {
    let source = include_str!("mistake.rs");
    let body = source.split_once("pub enum Mistake {").unwrap().1.split_once("\n}").unwrap().0;
    let lines = body.lines().filter_map(|line| line.strip_prefix("    "));
    let names = lines.filter(|line| line.starts_with(char::is_uppercase));
    names.map(|line| line.split(|c: char| !c.is_alphanumeric()).next().unwrap().to_string()).collect()
}

#[test]
fn every_mistake_is_told_as_its_golden_file_says() {
    mistake::tests::TOLD.with_borrow_mut(BTreeSet::clear);
    for problem in problems("mistakes") {
        let text = std::fs::read_to_string(&problem).unwrap();
        let parsed = parse(&text);
        assert_eq!(parsed.diagnostics, [], "{}", problem.display());
        let checked = check(&parsed.file, &[]).unwrap();
        let refused = checked.diagnostics.iter().any(|d| d.severity == crate::language::diagnostic::Severity::Refusal);
        assert_eq!(checked.landscape.is_none(), refused, "{}", problem.display());
        let name = problem.file_name().unwrap().to_string_lossy().into_owned();
        compare(&problem, &render(&name, &text, &checked.diagnostics));
    }
    let told = mistake::tests::TOLD.with_borrow(BTreeSet::clone);
    let missing: Vec<String> = variants().difference(&told).cloned().collect();
    assert!(missing.is_empty(), "no golden file shows {missing:?}");
}
