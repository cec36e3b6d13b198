//! Whole hunts by the real program: budgets, files, the same bits on any number of threads, interrupts.

use std::fs;
use std::path::Path;
use std::process::{Command, Stdio};
use std::time::Duration;

use serde_json::Value;
use thalweg::run::read_journal;

use super::folder::{Folder, Ran};

const PORE: &str = "given n = 7
unknown p[n, 3] in [-2, 2]
alike shift p, rotate p, mirror p, exchange p
let s(i, j) = sum(k in 1..3: (p[i,k] - p[j,k])^2)
minimise sum(i in 1..n, j in i+1..n: 4*(s(i,j)^-6 - s(i,j)^-3))
show size = sqrt(s(1, 2))
";

const WELLS: &str = "unknown x[2] in [-2, 2]\nmaximise -((x[1]^2 - 1)^2 + (x[2]^2 - 1)^2 + 0.1*x[1])\n";

fn hunt(folder: &Folder, problem: &str, options: &[&str]) -> Ran {
    folder.put("problem.land", problem);
    let arguments: Vec<&str> = ["hunt", "problem.land", "--quiet"].iter().chain(options).copied().collect();
    folder.run(&arguments)
}

fn json(path: &Path) -> Value {
    serde_json::from_str(&fs::read_to_string(path).unwrap()).unwrap()
}

#[test]
fn a_hunt_leaves_a_whole_run_folder() {
    let folder = Folder::new();
    let ran = hunt(&folder, PORE, &["--evals", "2e4", "--seed", "3"]);
    assert_eq!((ran.status, ran.err.as_str()), (Some(0), ""), "{ran:?}");
    assert!(ran.out.contains("lowest value met: -16.50538416"), "{}", ran.out);
    assert!(ran.out.ends_with("the results are in results/problem\n"), "{}", ran.out);
    assert!(!ran.out.contains("global"), "{}", ran.out);
    let run = folder.path().join("results/problem");
    let minima = json(&run.join("minima.json"));
    let lowest = &minima["minima"][0];
    assert_eq!((&minima["seed"], &lowest["kind"]), (&Value::from(3), &Value::from("interior")));
    assert_eq!(lowest["at"]["p"].as_array().unwrap().len(), 7);
    assert!(lowest["residual"].as_f64().unwrap() < 1e-12);
    assert_eq!(lowest["stiffness"].as_array().unwrap().iter().filter(|x| x.as_f64() == Some(0.0)).count(), 6);
    assert!(lowest["shows"]["size"].as_f64().unwrap() > 1.0);
    let end = json(&run.join("run.json"))["end"].clone();
    assert_eq!((&end["reason"], &end["evaluations"]), (&Value::from("evaluations"), &minima["evaluations"]));
    assert_eq!(fs::read_to_string(run.join("problem.land")).unwrap(), PORE);
    let journal = fs::read_to_string(run.join("journal.jsonl")).unwrap();
    let entries = read_journal(&journal);
    assert_eq!((entries.bad_line, entries.entries.len() as u64), (None, end["rounds"].as_u64().unwrap()));
    let table = fs::read_to_string(run.join("minima.csv")).unwrap();
    assert_eq!(table.lines().count(), 1 + minima["minima"].as_array().unwrap().len());
}

/// The promise of determinism, on the whole program.
#[test]
fn any_number_of_threads_gives_the_same_bytes() {
    let of = |threads: &str| {
        let folder = Folder::new();
        let ran = hunt(&folder, PORE, &["--evals", "6e4", "--threads", threads]);
        assert_eq!(ran.status, Some(0), "{ran:?}");
        let read = |name: &str| fs::read(folder.path().join("results/problem").join(name)).unwrap();
        [read("minima.json"), read("minima.csv"), read("journal.jsonl")]
    };
    let one = of("1");
    assert!(one == of("2"), "1 and 2 threads differ");
    assert!(one == of("5"), "1 and 5 threads differ");
}

#[test]
fn budgets_end_hunts() {
    let folder = Folder::new();
    let ran = hunt(&folder, PORE, &["--until", "target=-15.9", "--evals", "1e6", "--name", "target"]);
    assert!(ran.out.contains("Target met; the results are in results/target"), "{ran:?}");
    let spent = json(&folder.path().join("results/target/minima.json"))["evaluations"].as_u64().unwrap();
    assert!(spent < 100_000, "{spent}");
    let ran = hunt(&folder, PORE, &["--for", "1s", "--name", "time"]);
    assert_eq!(ran.status, Some(0), "{ran:?}");
    assert_eq!(json(&folder.path().join("results/time/run.json"))["end"]["reason"], "time");
    let ran = hunt(&folder, PORE, &["--until", "coverage=0.5", "--evals", "1e6", "--name", "covered"]);
    assert!(ran.out.contains("Coverage reached"), "{ran:?}");
    assert!(
        json(&folder.path().join("results/covered/minima.json"))["coverage"]["covered"]["interval"]["low"].as_f64()
            >= Some(0.5)
    );
    let ran = hunt(&folder, PORE, &["--until", "quiet=5e3", "--evals", "1e6", "--name", "quiet"]);
    assert!(ran.out.contains("No lower value for long"), "{ran:?}");
    // A small budget is not overrun by a whole round.
    hunt(&folder, PORE, &["--evals", "500", "--name", "small"]);
    let spent = json(&folder.path().join("results/small/minima.json"))["evaluations"].as_u64().unwrap();
    assert!(spent < 1500, "{spent}");
}

/// Of a maximum the value as written is told, and targets are compared with it.
#[test]
fn a_maximum_is_not_negated() {
    let folder = Folder::new();
    let ran = hunt(&folder, WELLS, &["--evals", "2e4", "--json"]);
    let minima: Value = serde_json::from_str(&ran.out).unwrap();
    let highest = minima["minima"][0]["value"].as_f64().unwrap();
    assert!(0.09 < highest && highest < 0.11, "{highest}");
    let ran = hunt(&folder, WELLS, &["--until", "target=0.1", "--evals", "1e6"]);
    assert!(ran.out.contains("Target met"), "{ran:?}");
}

#[test]
fn known_points_come_first_and_are_marked() {
    let folder = Folder::new();
    folder.put("points.csv", "\"x[2]\",\"x[1]\"\n1.1,-0.9\n");
    let ran = hunt(&folder, WELLS, &["--evals", "3000", "--from", "points.csv", "--json"]);
    let minima: Value = serde_json::from_str(&ran.out).unwrap_or_else(|error| panic!("{error}: {ran:?}"));
    let lowest = &minima["minima"][0];
    assert_eq!((&lowest["first"]["heuristic"], &lowest["hits"]["given"]), (&"given".into(), &1.into()), "{lowest}");
    let ran = hunt(&folder, WELLS, &["--evals", "3000", "--from", "results/problem", "--json", "--name", "again"]);
    let again: Value = serde_json::from_str(&ran.out).unwrap();
    for minimum in again["minima"].as_array().unwrap() {
        assert_eq!((&minimum["hits"]["given"], &minimum["first"]["heuristic"]), (&1.into(), &"given".into()));
    }
    assert_eq!(json(&folder.path().join("results/again/run.json"))["settings"]["given_points"], 4);
}

#[test]
fn an_interrupt_ends_a_hunt_with_its_results() {
    let folder = Folder::new();
    folder.put("problem.land", PORE);
    let child = Command::new(env!("CARGO_BIN_EXE_thalweg"))
        .args(["hunt", "problem.land", "--for", "10m"])
        .current_dir(folder.path())
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn()
        .unwrap();
    let journal = folder.path().join("results/problem/journal.jsonl");
    // Until it is well under way; a minute would mean that it never is.
    for _ in 0..600 {
        if fs::metadata(&journal).is_ok_and(|metadata| metadata.len() > 1000) {
            break;
        }
        std::thread::sleep(Duration::from_millis(100));
    }
    let sent = Command::new("kill").args(["-INT", &child.id().to_string()]).status().unwrap();
    assert!(sent.success());
    let ended = child.wait_with_output().unwrap();
    let out = String::from_utf8(ended.stdout).unwrap();
    assert_eq!(ended.status.code(), Some(0), "{out}");
    assert!(out.contains("Interrupted; the results are in results/problem"), "{out}");
    let run = folder.path().join("results/problem");
    assert_eq!(json(&run.join("run.json"))["end"]["reason"], "interrupted");
    assert!(!json(&run.join("minima.json"))["minima"].as_array().unwrap().is_empty());
}

#[test]
fn what_cannot_be_done_is_refused_before_a_folder_is_made() {
    let folder = Folder::new();
    let refused = |problem: &str, options: &[&str], words: &str| {
        let ran = hunt(&folder, problem, options);
        assert_eq!((ran.status, ran.out.as_str()), (Some(2), ""), "{options:?}: {ran:?}");
        assert!(ran.err.contains(words), "{options:?}: {}", ran.err);
        assert!(!folder.path().join("results").exists(), "{options:?}");
    };
    refused(
        "unknown x[2] in [-1, 1]\nalike exchange x\nminimise x[1] + 2*x[2]\n",
        &[],
        "`alike exchange x` does not hold",
    );
    refused(WELLS, &["--mix", "hopp"], "there is no heuristic `hopp`");
    refused(WELLS, &["--mix", "hop,hop"], "named twice");
    refused(WELLS, &["--given", "n=3"], "no given `n`");
    refused(WELLS, &["--given", "n=3..5"], "not available yet");
    refused(WELLS, &["--until", "coverage=90"], "between 0 and 1");
    refused(WELLS, &["--until", "coverage=0.9", "--survey", "0"], "needs a survey");
    refused(WELLS, &["--until", "luck=1"], "no condition `luck`");
    refused(WELLS, &["--evals", "0"], "not a whole number of evaluations");
    refused(WELLS, &["--survey", "2"], "not a share");
    refused(WELLS, &["--name", "../up"], "--name");
    refused(WELLS, &["--from", "nowhere.csv"], "there is no file nowhere.csv");
    folder.put("bad.csv", "\"x[1]\",\"x[2]\"\n0.5,9\n");
    refused(WELLS, &["--from", "bad.csv"], "bad.csv");
}

#[test]
fn a_run_is_never_overwritten_and_outside_failures_say_so() {
    let folder = Folder::new();
    assert_eq!(hunt(&folder, WELLS, &["--evals", "500", "--name", "mine"]).status, Some(0));
    let ran = hunt(&folder, WELLS, &["--evals", "500", "--name", "mine"]);
    assert_eq!(ran.status, Some(2), "{ran:?}");
    assert!(ran.err.contains("results/mine"), "{}", ran.err);
    assert!(hunt(&folder, WELLS, &["--evals", "500"]).out.contains("results/problem\n"));
    assert!(hunt(&folder, WELLS, &["--evals", "500"]).out.contains("results/problem-2\n"));
    folder.put("occupied", "a file where the folder should be");
    let ran = hunt(&folder, WELLS, &["--evals", "500", "--into", "occupied"]);
    assert_eq!(ran.status, Some(3), "{ran:?}");
}

/// Points outside the landscape are counted and told, and end nothing.
#[test]
fn trouble_is_told() {
    let folder = Folder::new();
    let ran = hunt(&folder, "unknown x in [-1, 3]\nminimise log(x)^2 + x\n", &["--evals", "3000"]);
    assert_eq!(ran.status, Some(0), "{ran:?}");
    assert!(
        ran.out.contains("Outside the landscape (no finite value): ") && ran.out.contains("first at {\"x\":"),
        "{}",
        ran.out
    );
    let ran = hunt(&folder, "unknown x in [-1, 1]\nunknown y in [-1, 1]\nminimise (x + y)^2\n", &["--evals", "3000"]);
    assert!(ran.out.contains("flat"), "{}", ran.out);
}

/// Every problem of the package is sound, its promises hold, its gradient agrees with differences.
#[test]
fn the_problems_of_the_package() {
    let folder = Folder::new();
    let problems = Path::new(env!("CARGO_MANIFEST_DIR")).join("problems");
    let mut count = 0;
    for entry in fs::read_dir(problems).unwrap() {
        let path = entry.unwrap().path();
        let ran = folder.run(&["check", path.to_str().unwrap(), "--json"]);
        let facts: Value = serde_json::from_str(&ran.out).unwrap_or_else(|error| panic!("{error}: {}", ran.err));
        assert_eq!(ran.status, Some(0), "{}: {}", path.display(), ran.err);
        assert!(facts["broken"].as_array().unwrap().is_empty(), "{facts}");
        assert!(facts["gradient"]["worst"].as_f64().unwrap() < 1e-6, "{facts}");
        let text = fs::read_to_string(&path).unwrap();
        assert!(text.starts_with('#') && text.contains("nvented"), "{} says what is invented", path.display());
        count += 1;
    }
    assert!(count >= 8, "{count} problems");
}
