//! The language from text to landscape.

use proptest::prelude::*;
use thalweg::landscape::{Landscape, check};
use thalweg::language::parse;

/// Every example of the language reference is a sound problem.
#[test]
fn the_reference_is_right() {
    let reference = include_str!("../../src/language/reference.md");
    let blocks: Vec<&str> = reference.split("```").skip(1).step_by(2).collect();
    assert!(!blocks.is_empty());
    for block in blocks {
        let (_, example) = block.split_once('\n').unwrap();
        let (landscape, told) = checked(example);
        assert!(landscape.is_some(), "{example}\n{told:?}");
    }
}

fn checked(text: &str) -> (Option<Landscape>, Vec<String>) {
    let parsed = parse(text);
    assert_eq!(parsed.diagnostics, [], "{text}");
    let checked = check(&parsed.file, &[]).unwrap();
    (checked.landscape, checked.diagnostics.into_iter().map(|diagnostic| diagnostic.message).collect())
}

/// What the reference says of lines, names and limits.
#[test]
fn lines_and_constants() {
    let text = "unknown x in [-1, 1]\nlet c = if x < π/8\n    then x^2\n    else sin(x)\nminimise c\n";
    assert!(checked(text).0.is_some());
}

/// As many written terms as the parser takes, and as many list entries as anyone writes.
#[test]
fn long_sums_and_lists() {
    for terms in [401, 900] {
        let sum: Vec<String> = (1..=terms).map(|k| format!("(x - {k})^2/{k} + 1")).collect();
        let text = format!("unknown x in [-1, 1]\nminimise {}\n", sum[..terms / 2].join(" + "));
        let (landscape, told) = checked(&text);
        let landscape = landscape.unwrap_or_else(|| panic!("{terms}: {told:?}"));
        let expected: f64 = (1..=terms / 2).map(|k| (0.5 - k as f64).powi(2) / k as f64 + 1.0).sum();
        let value = landscape.evaluate_term(landscape.objective, &[0.5]);
        assert!((value - expected).abs() < 1e-10 * expected, "{value} for {expected}");
        thalweg::kernel::compile(&landscape).unwrap();
    }
    let list: Vec<String> = (1..=300).map(|k| format!("cos({k}*x)")).collect();
    let text = format!(
        "unknown x in [-1, 1]\nlet v = [{}]\nminimise sum(v) + sum(i in 1..300: i*v[i]) + v[299]\n",
        list.join(", ")
    );
    let (landscape, told) = checked(&text);
    let landscape = landscape.unwrap_or_else(|| panic!("{told:?}"));
    let cosine = |k: i32| (f64::from(k) * 0.3).cos();
    let expected: f64 = (1..=300).map(|k| f64::from(1 + k) * cosine(k)).sum::<f64>() + cosine(299);
    let value = landscape.evaluate_term(landscape.objective, &[0.3]);
    assert!((value - expected).abs() < 1e-7, "{value} for {expected}");
    thalweg::kernel::compile(&landscape).unwrap();
}

/// Warnings of domains heed the comparisons around them.
#[test]
fn domains_are_narrowed_by_conditions() {
    let n_warnings = |formula: &str| {
        let text = format!("unknown x in [-1, 1]\nunknown y in [-1, 1]\nminimise {formula} + x*y\n");
        checked(&text)
            .1
            .iter()
            .filter(|message| message.starts_with("this ") || message.starts_with("the base"))
            .count()
    };
    for sound in [
        "(if x > 0 then log(x) else 0)",
        "(if 0 < x and y > 0 then log(2*x)/y else 0)",
        "(if x <= 0 then 0 else log(x + x^2))",
        "(if not (x < 0) then sqrt(x) else sqrt(-x))",
        "(if x == 0 then 0 else 1/x + x^-2)",
        "(if x > y then sqrt(x - y) else 0)",
        "(if x >= 0.5 or y > 2 then 0 else acos(2*min(x, 0.4) + 0*max(x, -0.4)))^2*0 + (if x > 0 then x^0.5 else 0)",
    ] {
        let most = usize::from(sound.contains("acos"));
        assert!(n_warnings(sound) <= most, "{sound}: {}", n_warnings(sound));
    }
    for doubtful in [
        "log(x)",
        "(if x >= 0 then log(x) else 0)",
        "(if x > 0 then 0 else log(x))",
        "(if x > 0 or y > 0 then log(x) else 0)",
        "(if y > 0 then 1/x else 0)",
        "(if x > 0 then sqrt(y - x) else 0)",
    ] {
        assert_eq!(n_warnings(doubtful), 1, "{doubtful}");
    }
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
