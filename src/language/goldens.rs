//! Golden files: what each mistake looks like, and the tree of a file that says everything. `BLESS=1` rewrites them.

use std::collections::BTreeSet;
use std::fs;
use std::path::{Path, PathBuf};

use proptest::prelude::*;

use super::{decode, parse, render};

fn problems(folder: &str) -> Vec<PathBuf> {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/language").join(folder);
    let entries = fs::read_dir(&folder).unwrap().map(|entry| entry.unwrap().path());
    let mut files: Vec<PathBuf> = entries.filter(|path| path.extension().is_some_and(|end| end == "land")).collect();
    files.sort();
    assert!(!files.is_empty());
    files
}

fn compare(problem: &Path, found: &str) {
    let golden = problem.with_extension("txt");
    if std::env::var_os("BLESS").is_some() {
        fs::write(&golden, found).unwrap();
    }
    let expected = fs::read_to_string(&golden).unwrap_or_default();
    assert_eq!(found, expected, "{} differs; BLESS=1 rewrites it", golden.display());
}

/// The variants of the enum, read from its source, as file names: a new one without a golden file fails.
fn variants() -> BTreeSet<String> {
    let source = include_str!("mistake.rs");
    let body = source.split_once("pub enum Mistake {").unwrap().1.split_once("\n}").unwrap().0;
    let lines = body.lines().filter_map(|line| line.strip_prefix("    "));
    let names = lines.filter(|line| line.starts_with(char::is_uppercase));
    let snake = |name: &str| {
        let mut snake = String::new();
        for letter in name.chars().take_while(|letter| letter.is_alphanumeric()) {
            if letter.is_uppercase() && !snake.is_empty() {
                snake.push('_');
            }
            snake.extend(letter.to_lowercase());
        }
        snake
    };
    names.map(snake).collect()
}

#[test]
fn every_mistake_is_told_as_its_golden_file_says() {
    let mut shown = BTreeSet::new();
    for problem in problems("mistakes") {
        let name = problem.file_name().unwrap().to_string_lossy().into_owned();
        let rendered = match decode(&fs::read(&problem).unwrap()) {
            Ok(text) => {
                let parsed = parse(&text);
                assert!(!parsed.diagnostics.is_empty(), "{name}");
                render(&name, &text, &parsed.diagnostics)
            }
            Err((text, diagnostic)) => render(&name, &text, &[diagnostic]),
        };
        compare(&problem, &rendered);
        shown.insert(problem.file_stem().unwrap().to_string_lossy().into_owned());
    }
    assert_eq!(shown, variants());
}

#[test]
fn a_file_that_says_everything_parses_to_its_golden_tree() {
    for problem in problems("trees") {
        let text = fs::read_to_string(&problem).unwrap();
        let parsed = parse(&text);
        assert_eq!(parsed.diagnostics, []);
        compare(&problem, &format!("{:#?}\n", parsed.file));
    }
}

#[test]
fn powers_and_signs_bind_as_in_mathematics() {
    let same = |left: &str, right: &str| {
        let tree = |text: &str| {
            let parsed = parse(&format!("minimise {text}"));
            assert_eq!(parsed.diagnostics, [], "{text}");
            // Spans differ; what matters is the shape.
            let shape = format!("{:?}", parsed.file);
            shape.split("Span {").map(|part| part.split_once('}').map_or(part, |(_, rest)| rest)).collect::<String>()
        };
        assert_eq!(tree(left), tree(right), "{left} and {right}");
    };
    same("-x^2", "-(x^2)");
    same("2^3^4", "2^(3^4)");
    same("2^-x^2", "2^(-(x^2))");
    same("a - b - c", "(a - b) - c");
    same("a/b*c", "(a/b)*c");
    same("not a < b and c", "(not (a < b)) and c");
    same("a or b and c", "a or (b and c)");
    same("-a*b", "(-a)*b");
    same("a +\n  b", "a + b");
    same("(a\n+ b)", "a + b");
    same("if a then b else if c then d else e", "if a then b else (if c then d else e)");
    same("if a then b\nelse c", "if a then b else c");
}

#[test]
fn hostile_texts_end_soon() {
    let deep = |open: &str, close: &str, n: usize| format!("minimise {}x{}", open.repeat(n), close.repeat(n));
    let texts = [
        deep("(", ")", 10_000),
        deep("[", "]", 10_000),
        deep("-", "", 10_000),
        deep("not ", "", 10_000),
        deep("x^", "", 10_000),
        deep("if x then x else ", "", 10_000),
        deep("f(", ")", 10_000),
        format!("given w = [{}]", "1, ".repeat(100_000) + "1"),
        format!("minimise {}", "x + ".repeat(100_000) + "x"),
        "unknown x in [0, 1] ".repeat(10_000),
        "(".repeat(100_000),
        "\"".repeat(10_000),
        "let ".repeat(50_000),
    ];
    for text in texts {
        let parsed = parse(&text);
        render("hostile.land", &text, &parsed.diagnostics);
    }
    assert!(parse(&format!("given w = [{}]", "1, ".repeat(100_000) + "1")).diagnostics.is_empty());
}

proptest! {
    /// Whatever the bytes, parsing and drawing come to an end without a panic.
    #[test]
    fn any_bytes(bytes in proptest::collection::vec(any::<u8>(), 0..200)) {
        match decode(&bytes) {
            Ok(text) => drop(render("any", &text, &parse(&text).diagnostics)),
            Err((text, diagnostic)) => drop(render("any", &text, &[diagnostic])),
        }
    }

    /// The same for words and signs of the language in any order.
    #[test]
    fn any_words(words in proptest::collection::vec(0..WORDS.len(), 0..60)) {
        let text: Vec<&str> = words.into_iter().map(|word| WORDS[word]).collect();
        let text = text.join(" ");
        let parsed = parse(&text);
        render("any", &text, &parsed.diagnostics);
    }
}

const WORDS: [&str; 44] = [
    "title", "given", "unknown", "let", "require", "minimise", "maximise", "alike", "show", "in", "if", "then", "else",
    "and", "or", "not", "for", "cyclic", "sampled", "sum", "min", "exchange", "x", "y", "f", "p", "i", "1", "2.5", "(",
    ")", "[", "]", "{", "}", ",", ":", "..", "=", "+", "-", "^", "<", "\n",
];
