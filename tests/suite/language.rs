//! The language from text to landscape.

use proptest::prelude::*;
use thalweg::landscape::check;
use thalweg::language::parse;

/// The example of the language reference is a sound problem.
#[test]
fn the_reference_is_right() {
    let reference = include_str!("../../src/language/reference.md");
    let example = reference.split("```text\n").nth(1).unwrap().split("```").next().unwrap();
    let parsed = parse(example);
    assert_eq!(parsed.diagnostics, []);
    assert!(check(&parsed.file, &[]).unwrap().landscape.is_some());
}

const LINES: [&str; 16] = [
    "given n = 3",
    "given w = [1, 2, 3]",
    "given h[i in 1..n] = i/n",
    "unknown x in [-1, 1]",
    "unknown p[n, 2] in [-1, 1]",
    "unknown q[n] in [0, 2] cyclic",
    "let f(u, v) = u*v + x",
    "let r[i in 1..n] = f(p[i,1], w[i])",
    "let z = sum(r)",
    "let y[1] = 2",
    "alike exchange p, rotate p, flip q",
    "minimise sum(i in 1..n, j in i+1..n: norm(p[i] - p[j])^-2) + q[1]",
    "minimise x^2 + z",
    "maximise if x > 0 then min(q) else h[n]",
    "show s[i in 1..n] = p[i,1]*h[i]",
    "require x <= 1",
];

proptest! {
    /// Sound lines in any order and number: checking comes to an end without a panic, and what it accepts compiles.
    #[test]
    fn any_lines(lines in proptest::collection::vec(0..LINES.len(), 1..12)) {
        let text: Vec<&str> = lines.into_iter().map(|line| LINES[line]).collect();
        let parsed = parse(&text.join("\n"));
        if let Some(landscape) = check(&parsed.file, &[]).unwrap().landscape {
            thalweg::kernel::compile(&landscape).unwrap();
        }
    }
}
