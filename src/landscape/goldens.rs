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

#[test]
fn problems_become_the_terms_of_their_golden_files() {
    for problem in problems("terms") {
        let text = std::fs::read_to_string(&problem).unwrap();
        let checked = check(&parse(&text).file, &[]).unwrap();
        compare(&problem, &checked.landscape.unwrap().print_terms());
    }
}

/// Values worked out by hand beside the formulas.
#[test]
fn values_are_those_of_the_formulas() {
    let value = |text: &str, at: &[f64]| {
        let checked = check(&parse(text).file, &[]).unwrap();
        let landscape = checked.landscape.unwrap_or_else(|| panic!("{:#?}", checked.diagnostics));
        landscape.evaluate_term(landscape.objective, at)
    };
    let plane = |objective: &str| format!("unknown p[3, 2] in [-9, 9]\nunknown x in [-9, 9]\nminimise {objective}");
    let at = [1.0, 2.0, 4.0, 6.0, -1.0, 2.5, 3.0];
    for (objective, expected) in [
        ("norm(p[1] - p[2])", 5.0),
        ("dot(p[1], p[2])", 16.0),
        ("sum(p)", 14.5),
        ("sum(i in 1..3, j in i+1..3: (p[i,1] - p[j,1])^2)", 9.0 + 4.0 + 25.0),
        ("sum(i in 1..3 if i != 2: p[i,2])", 4.5),
        ("max(p) - min(p)", 7.0),
        ("product(i in 1..3: p[i,1])", -4.0),
        ("-x^2", -9.0),
        ("2^3^2*x", 1536.0),
        ("if x > 2 or x < 0 then x else 7", 3.0),
        ("sum(i in 1..20 if floor(i/7)*7 == i: i*x)", 63.0),
        ("sum(i in 1..0: x) + x", 3.0),
        ("norm(2*p[2]/x)", 2.0 * 52.0_f64.sqrt() / 3.0),
    ] {
        let found = value(&plane(objective), &at);
        assert!((found - expected).abs() <= 1e-14 * expected.abs(), "{objective}: {found}, not {expected}");
    }
}

#[test]
fn a_long_chain_of_definitions_is_refused_and_not_overrun() {
    let mut text = String::from("unknown x in [0, 1]\nminimise a0\n");
    (0..20_000).for_each(|k| text.push_str(&format!("let a{k} = a{} + 1\n", k + 1)));
    text.push_str("let a20000 = x\n");
    let checked = check(&parse(&text).file, &[]).unwrap();
    assert!(checked.landscape.is_none());
    assert!(checked.diagnostics[0].message.contains("too long or too deep"), "{:?}", checked.diagnostics[0]);
}
