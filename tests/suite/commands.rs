//! The commands: whole outputs, wrong input of every kind, exit statuses.

use std::time::{Duration, Instant};

use super::folder::{Folder, Ran};

const WELLS: &str = "title \"Two wells (invented)\"
given n = 2
unknown x[n] in [-2, 2]
alike exchange x, flip x
minimise sum(i in 1..n: (x[i]^2 - 1)^2)
";

/// Checks a problem that is refused: exit 2 within a second, nothing on standard output, a message.
fn refused(content: impl AsRef<[u8]>) -> String {
    let folder = Folder::new();
    folder.put("problem.land", content);
    let began = Instant::now();
    let ran = folder.run(&["check", "problem.land"]);
    assert!(began.elapsed() < Duration::from_secs(1), "it took {:?}", began.elapsed());
    assert_eq!((ran.status, ran.out.as_str()), (Some(2), ""), "{ran:?}");
    assert!(ran.err.len() < 10_000, "a message, not a flood: {} bytes", ran.err.len());
    ran.err
}

/// Names as long as a book: neither a hang in the search for what was meant, nor a flood of letters.
#[test]
fn endless_names_are_refused_within_a_second() {
    let (defined, misspelt) = ("a".repeat(100_000), format!("{}b", "a".repeat(99_999)));
    let err = refused(format!("given {defined} = 1\nunknown x in [-1, 1]\nminimise x^2 + {misspelt}\n"));
    assert!(err.contains("this name has 100000 letters"), "{err}");
    let err = refused(format!("unknown x in [-1, 1]\nminimise x^2 + {}\n", "q".repeat(1_000_000)));
    assert!(err.contains("this name has 1000000 letters"), "{err}");
    let folder = Folder::new();
    folder.put("wells.land", WELLS);
    let ran = folder.run(&["check", "wells.land", "--given", &format!("{}=1", "n".repeat(50_000))]);
    assert_eq!(ran.status, Some(2), "{}", ran.err.len());
}

fn usage(arguments: &[&str]) -> String {
    let folder = Folder::new();
    folder.put("wells.land", WELLS);
    let ran = folder.run(arguments);
    assert_eq!((ran.status, ran.out.as_str()), (Some(2), ""), "{ran:?}");
    ran.err
}

#[test]
fn check_shows_a_sound_problem() {
    let folder = Folder::new();
    folder.put("wells.land", WELLS);
    let Ran { status, out, err } = folder.run(&["check", "wells.land", "--given", "n=3"]);
    assert_eq!((status, err.as_str()), (Some(0), ""), "{out}");
    assert!(out.starts_with("wells.land: Two wells (invented)\n  unknowns   3: x[3]\n  program    "), "{out}");
    assert!(out.contains("evaluations a second on one core\n"), "{out}");
    assert!(out.contains("\n  promises   2 of 2 held at random points\n"), "{out}");
}

#[test]
fn check_prints_json_and_nothing_else() {
    let folder = Folder::new();
    folder.put("wells.land", WELLS);
    let ran = folder.run(&["check", "wells.land", "--json"]);
    let facts: serde_json::Value = serde_json::from_str(&ran.out).unwrap();
    assert_eq!(facts["unknowns"][0]["counts"][0], 2);
    assert_eq!(facts["broken"].as_array().unwrap().len(), 0);
    assert!(facts["gradient"]["worst"].as_f64().unwrap() < 1e-6, "{facts}");
    assert!(facts["evaluations_a_second"].as_f64().unwrap() > 1000.0, "{facts}");
}

#[test]
fn a_false_promise_is_refused_with_two_points_and_values() {
    let folder = Folder::new();
    folder.put("false.land", "unknown x[2] in [-1, 1]\nalike exchange x\nminimise x[1]^2 + 2*x[2]^2\n");
    let ran = folder.run(&["check", "false.land"]);
    assert_eq!(ran.status, Some(2), "{ran:?}");
    assert!(ran.out.contains("`alike exchange x` does not hold"), "{}", ran.out);
    assert_eq!(ran.out.matches(" at x = [").count(), 2, "{}", ran.out);
}

#[test]
fn an_undeclared_symmetry_is_suggested() {
    let folder = Folder::new();
    folder.put("like.land", "unknown x[3] in [-1, 2]\nminimise sum(i in 1..3: (x[i]^2 - 1)^2 + 0.1*x[i])\n");
    let ran = folder.run(&["check", "like.land"]);
    assert_eq!(ran.status, Some(0), "{ran:?}");
    assert!(ran.out.contains("not declared: alike exchange x\n"), "{}", ran.out);
}

#[test]
fn hopeless_files_are_refused_within_a_second() {
    let nested = format!("unknown x in [0, 1]\nminimise {}x{}\n", "(".repeat(10_000), ")".repeat(10_000));
    assert!(refused(nested).contains("problem.land, line 2"));
    assert!(refused("unknown x in [0, 1]\nminimise x*sum(i in 1..10^12: sin(i*x))\n").contains("line 2"));
    assert!(!refused("").is_empty());
    assert!(!refused([0x7f, b'E', b'L', b'F', 0, 0xff, 0xfe, 0]).is_empty());
}

#[test]
fn all_mistakes_of_a_file_come_at_once() {
    let text = "given lenght = 2\nunknown x in [3, 1]\nunknown y in [0, length]\nminimise x + z\n";
    let message = refused(text);
    for place in ["line 2", "line 3", "line 4", "lenght"] {
        assert!(message.contains(place), "{place} in:\n{message}");
    }
}

#[test]
fn what_is_no_problem_file_is_told_so() {
    assert!(usage(&["check", "missing.land"]).contains("there is no file missing.land"));
    assert!(usage(&["check", "."]).contains(". is a folder"));
    let folder = Folder::new();
    let large = std::fs::File::create(folder.path().join("large.land")).unwrap();
    large.set_len((16 << 20) + 1).unwrap();
    let ran = folder.run(&["check", "large.land"]);
    assert_eq!(ran.status, Some(2));
    assert_eq!(ran.err, "large.land is larger than 16 MiB; is it the right file?\n");
}

#[test]
fn wrong_usage_is_refused() {
    assert!(usage(&["check", "wells.land", "--given", "n"]).contains("NAME=NUMBER"));
    assert!(usage(&["check", "wells.land", "--given", "n=5..30"]).contains("not available yet"));
    assert!(usage(&["check", "wells.land", "--given", "m=3"]).contains("no given `m`"));
    assert!(usage(&["check", "wells.land", "--given", "n=2", "--given", "n=3"]).contains("set twice"));
    assert!(usage(&["minima", "none"]).contains("there is no run folder none"));
    usage(&["minima", "none", "--json", "--csv"]);
    usage(&["stroll"]);
    usage(&[]);
}

#[test]
fn a_damaged_file_of_minima_is_refused_with_its_name() {
    let folder = Folder::new();
    for content in ["", "{\"format\": ", "{}", "{\"format\":{\"name\":\"other\",\"version\":3}}"] {
        folder.put("results/pore/minima.json", content);
        let ran = folder.run(&["minima", "pore"]);
        assert_eq!((ran.status, ran.out.as_str()), (Some(2), ""), "{ran:?}");
        assert!(ran.err.contains("minima.json"), "{}", ran.err);
    }
}

#[test]
fn help_says_the_job_and_names_only_what_is_there() {
    let ran = Folder::new().run(&["--help"]);
    assert_eq!(ran.status, Some(0));
    assert!(ran.out.contains("lowest point") && ran.out.contains("thalweg check pore.land"), "{}", ran.out);
    for later in ["compare", "certify"] {
        assert!(!ran.out.contains(later), "{later} is not built yet");
    }
}

#[test]
fn minima_shows_a_run_as_table_json_and_csv() {
    let folder = Folder::new();
    let text = include_str!("../data/edge/minima.json");
    folder.put("results/wells/minima.json", text);
    let table = folder.run(&["minima", "wells"]);
    assert_eq!((table.status, table.err.as_str()), (Some(0), ""));
    assert_eq!(table.out, include_str!("../data/edge/minima.txt"));
    assert_eq!(folder.run(&["minima", "results/wells"]).out, table.out, "by path as by name");
    assert_eq!(folder.run(&["minima", "wells", "--json"]).out, text, "written as it was read");
    let csv = folder.run(&["minima", "wells", "--csv"]).out;
    assert_eq!(
        csv.lines().next(),
        Some(
            "rank,value,kind,residual,softest,stiffest,hits survey,first evaluation,first round,first heuristic,x[1],x[2]"
        )
    );
    assert_eq!(csv.lines().nth(1), Some("1,0,interior,0,8,8,12,31,0,survey,-1,-1"));
}

#[test]
fn a_reader_who_leaves_early_is_no_failure() {
    use std::process::{Command, Stdio};
    let folder = Folder::new();
    folder.put("wells.land", WELLS);
    let mut child = Command::new(env!("CARGO_BIN_EXE_thalweg"))
        .args(["check", "wells.land"])
        .current_dir(folder.path())
        .stdout(Stdio::piped())
        .spawn()
        .unwrap();
    drop(child.stdout.take());
    assert_eq!(child.wait().unwrap().code(), Some(0));
}
