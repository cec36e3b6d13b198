//! Hunts that are killed, starved of disk, moved, edited and gone on with: the real program, real signals, real files.
//!
//! What is compared: `minima.json`, `minima.csv` and `journal.jsonl`, byte for byte. Of `run.json` the seconds differ, of
//! `status.json` too.

use std::fs;
use std::path::{Path, PathBuf};
use std::process::{Child, Command, Output, Stdio};
use std::time::{Duration, Instant};

use serde_json::Value;

use super::folder::{Folder, Ran};

/// How often the main test kills. 200 were tried before this was written; put 200 here to try them again.
const KILLS: usize = 20;

const PORE: &str = "given n = 7
unknown p[n, 3] in [-2, 2]
alike shift p, rotate p, mirror p, exchange p
let s(i, j) = sum(k in 1..3: (p[i,k] - p[j,k])^2)
minimise sum(i in 1..n, j in i+1..n: 4*(s(i,j)^-6 - s(i,j)^-3))
";

const RUN: &str = "results/problem";

/// A hunt in a fresh folder, to its end.
fn hunted(options: &[&str]) -> Folder {
    let folder = Folder::new();
    folder.put("problem.land", PORE);
    let ran = folder.run(&[&["hunt", "problem.land", "--quiet"], options].concat());
    assert_eq!((ran.status, ran.err.as_str()), (Some(0), ""), "{ran:?}");
    folder
}

fn resume(folder: &Folder, options: &[&str]) -> Ran {
    folder.run(&[&["resume", "problem", "--quiet"], options].concat())
}

fn start(folder: &Folder, arguments: &[&str]) -> Child {
    Command::new(env!("CARGO_BIN_EXE_thalweg"))
        .args(arguments)
        .current_dir(folder.path())
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn()
        .unwrap()
}

fn signal(child: &Child, name: &str) {
    let sent = Command::new("kill").args([&format!("-{name}"), &child.id().to_string()]).status().unwrap();
    assert!(sent.success());
}

fn run_path(folder: &Folder) -> PathBuf {
    folder.path().join(RUN)
}

fn read(folder: &Folder) -> [Vec<u8>; 3] {
    ["minima.json", "minima.csv", "journal.jsonl"].map(|name| fs::read(run_path(folder).join(name)).unwrap())
}

/// Tells what differs without printing all of it.
fn demand_same(folder: &Folder, expected: &[Vec<u8>; 3], when: &str) {
    for (found, expected) in read(folder).iter().zip(expected) {
        let first = found.iter().zip(expected).position(|(a, b)| a != b);
        let around = |bytes: &[u8]| {
            let at = first.unwrap_or(found.len().min(expected.len()));
            String::from_utf8_lossy(&bytes[at.saturating_sub(80)..(at + 80).min(bytes.len())]).into_owned()
        };
        assert!(found == expected, "{when}: {}\n-- instead of --\n{}", around(found), around(expected));
    }
}

fn json(path: &Path) -> Value {
    serde_json::from_str(&fs::read_to_string(path).unwrap()).unwrap()
}

fn end(folder: &Folder) -> Value {
    json(&run_path(folder).join("run.json"))["end"].clone()
}

/// Waits until a journal has so many bytes; a minute would mean that it never does.
fn wait_for_journal(folder: &Folder, bytes: u64) {
    let journal = run_path(folder).join("journal.jsonl");
    let began = Instant::now();
    while fs::metadata(&journal).map_or(0, |metadata| metadata.len()) < bytes {
        assert!(began.elapsed() < Duration::from_secs(60), "no journal");
        std::thread::sleep(Duration::from_millis(5));
    }
}

fn finish(child: Child) -> (Option<i32>, String, String) {
    let Output { status, stdout, stderr } = child.wait_with_output().unwrap();
    (status.code(), String::from_utf8(stdout).unwrap(), String::from_utf8(stderr).unwrap())
}

/// Killed again and again at random instants, gone on with each time: the end is that of a hunt left alone.
#[test]
fn kills_at_random_instants_change_nothing() {
    let options = ["--evals", "6e4", "--threads", "2"];
    let began = Instant::now();
    let expected = read(&hunted(&options));
    let whole = began.elapsed().as_secs_f64();
    let (mut kills, mut ends) = (0, 0);
    let mut random: u64 = 12345;
    while kills < KILLS || ends == 0 {
        let folder = Folder::new();
        folder.put("problem.land", PORE);
        let mut begun = false;
        loop {
            random = random.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
            let share = (random >> 11) as f64 / (1_u64 << 53) as f64;
            let mut child = if begun {
                start(&folder, &["resume", "problem", "--quiet", "--threads", "2"])
            } else {
                start(&folder, &[&["hunt", "problem.land", "--quiet"], &options[..]].concat())
            };
            std::thread::sleep(Duration::from_secs_f64(0.8 * share * whole));
            // On Unix this is SIGKILL.
            let killed = child.try_wait().unwrap().is_none();
            let _ = child.kill();
            let (status, out, err) = finish(child);
            if !killed || status == Some(0) {
                assert_eq!(status, Some(0), "{out}{err}");
                ends += 1;
                demand_same(&folder, &expected, &format!("after {kills} kills"));
                break;
            }
            kills += 1;
            // Before run.json is there, there is nothing to go on with.
            begun = run_path(&folder).join("run.json").exists();
            if !begun {
                break;
            }
        }
    }
}

/// Not one bit depends on whether the evaluations were allowed at once or one after the other, nor on threads.
#[test]
fn a_larger_budget_gives_the_longer_hunt() {
    let expected = read(&hunted(&["--evals", "5e4"]));
    let folder = hunted(&["--evals", "9000", "--threads", "1"]);
    let early = read(&folder);
    let ran = resume(&folder, &["--evals", "9000"]);
    assert_eq!((ran.status, ran.err.as_str()), (Some(0), ""), "{ran:?}");
    demand_same(&folder, &early, "an equal budget");
    let ran = resume(&folder, &["--evals", "5000", "--threads", "1"]);
    assert_eq!(ran.status, Some(0), "{ran:?}");
    demand_same(&folder, &early, "a smaller budget drops nothing");
    // The smaller one is the budget now; it was reached.
    let before = fs::read(run_path(&folder).join("run.json")).unwrap();
    let ran = resume(&folder, &[]);
    assert!(ran.status == Some(0) && ran.out.contains("This hunt has ended: its evaluations were spent."), "{ran:?}");
    assert!(fs::read(run_path(&folder).join("run.json")).unwrap() == before);
    for (evaluations, threads) in [("2e4", "2"), ("5e4", "1")] {
        let ran = resume(&folder, &["--evals", evaluations, "--threads", threads]);
        assert_eq!(ran.status, Some(0), "{ran:?}");
    }
    demand_same(&folder, &expected, "three sessions");
    assert_eq!(json(&run_path(&folder).join("run.json"))["settings"]["evaluations"], 50_000);
}

/// A mix, another seed, given points and a maximum are the same after they went through the files.
#[test]
fn settings_survive() {
    let wells = "given h = 1\nunknown x[2] in [-2, 2]\nmaximise -h*((x[1]^2 - 1)^2 + (x[2]^2 - 1)^2 + 0.1*x[1])\n";
    let options = ["--mix", "hop:0.7,evolve:0.2,multistart", "--survey", "0.3", "--seed", "9", "--given", "h=2.5"];
    let hunt = |evaluations: &str| {
        let folder = Folder::new();
        folder.put("problem.land", wells);
        folder.put("points.csv", "\"x[2]\",\"x[1]\"\n1.1,-0.9\n0.1,0.30000000000000004\n");
        let budget = ["--evals", evaluations, "--from", "points.csv", "--name", "problem"];
        let ran = folder.run(&[&["hunt", "problem.land", "--quiet"], &options[..], &budget].concat());
        assert_eq!((ran.status, ran.err.as_str()), (Some(0), ""), "{ran:?}");
        folder
    };
    let expected = read(&hunt("6000"));
    let folder = hunt("300");
    let ran = resume(&folder, &["--evals", "6000"]);
    assert_eq!((ran.status, ran.err.as_str()), (Some(0), ""), "{ran:?}");
    demand_same(&folder, &expected, "settings");
    let given = run_path(&folder).join("given.csv");
    fs::write(&given, fs::read_to_string(&given).unwrap().replace('9', "8")).unwrap();
    let ran = resume(&folder, &["--evals", "7000"]);
    assert!(ran.status == Some(2) && ran.err.contains("given.csv: the points were edited"), "{ran:?}");
}

/// The last line cut anywhere, or overwritten: it is hunted again, and what was lost is told.
#[test]
fn a_torn_end_is_mended() {
    let folder = hunted(&["--evals", "3000"]);
    let expected = read(&folder);
    let journal = run_path(&folder).join("journal.jsonl");
    let text = &expected[2];
    let last = text[..text.len() - 1].iter().rposition(|&byte| byte == b'\n').unwrap() + 1;
    let lengths: Vec<usize> = (last..last + 24).chain((last..text.len()).step_by(13)).chain([text.len() - 1]).collect();
    for length in lengths {
        fs::write(&journal, &text[..length]).unwrap();
        let ran = resume(&folder, &["--evals", "3000"]);
        assert_eq!(ran.status, Some(0), "cut at {length}: {ran:?}");
        let lost = format!("1 line ({} bytes)", length - last);
        assert_eq!(length > last, ran.err.contains(&lost), "cut at {length}: {}", ran.err);
        demand_same(&folder, &expected, &format!("cut at {length}"));
    }
    fs::remove_file(&journal).unwrap();
    assert_eq!(resume(&folder, &["--evals", "3000"]).status, Some(0));
    demand_same(&folder, &expected, "the journal removed");
}

#[test]
fn an_altered_middle_is_refused_and_salvaged() {
    let folder = hunted(&["--evals", "5000"]);
    let expected = read(&folder);
    let journal = run_path(&folder).join("journal.jsonl");
    let mut lines: Vec<String> = String::from_utf8(expected[2].clone()).unwrap().lines().map(String::from).collect();
    lines[3] = lines[3].replacen("\"evaluations\":", "\"evaluations\":1", 1);
    let altered = lines.join("\n") + "\n";
    fs::write(&journal, &altered).unwrap();
    let ran = resume(&folder, &["--evals", "5000"]);
    assert!(ran.status == Some(2) && ran.err.contains("journal.jsonl, line 4: "), "{ran:?}");
    assert_eq!(fs::read_to_string(&journal).unwrap(), altered, "a refusal changes nothing");
    let ran = resume(&folder, &["--evals", "5000", "--salvage"]);
    assert!(ran.status == Some(0) && ran.err.contains("after line 3"), "{ran:?}");
    demand_same(&folder, &expected, "salvaged");
    let removed = fs::read_to_string(run_path(&folder).join("journal.removed")).unwrap();
    assert!(altered.ends_with(&removed) && removed.lines().count() == lines.len() - 3);
}

/// Sound lines of another hunt are no past of this one.
#[test]
fn another_hunts_journal_is_refused() {
    let (folder, other) = (hunted(&["--evals", "3000"]), hunted(&["--evals", "3000", "--seed", "2"]));
    fs::copy(run_path(&other).join("journal.jsonl"), run_path(&folder).join("journal.jsonl")).unwrap();
    let files = || ["minima.json", "run.json"].map(|name| fs::read(run_path(&folder).join(name)).unwrap());
    let before = files();
    let ran = resume(&folder, &["--evals", "5000"]);
    assert!(ran.status == Some(2) && ran.err.contains("does not follow from the settings"), "{ran:?}");
    assert!(files() == before, "a refusal changes nothing");
}

#[test]
fn what_cannot_be_gone_on_with_is_refused() {
    let folder = hunted(&["--evals", "2000"]);
    let run = run_path(&folder);
    let refused = |name: &str, from: &str, to: &str, words: &str| {
        let path = run.join(name);
        let text = fs::read_to_string(&path).unwrap();
        assert!(text.contains(from), "{name}: {from}");
        fs::write(&path, text.replacen(from, to, 1)).unwrap();
        let ran = resume(&folder, &["--evals", "4000"]);
        assert_eq!((ran.status, ran.out.as_str()), (Some(2), ""), "{ran:?}");
        assert!(ran.err.contains(words), "{}", ran.err);
        fs::write(&path, text).unwrap();
    };
    refused("run.json", "\"version\": 2", "\"version\": 3", "a newer version of the program");
    refused("run.json", "\"version\": 2", "\"version\": 1", "recorded too little");
    refused("run.json", "thalweg run", "other run", "not the run.json of a hunt");
    refused("run.json", "\"hop\"", "\"leap\"", "the share of `hop` is missing");
    refused("run.json", "{", "", "not the run.json of a hunt");
    refused("problem.land", "4*", "5*", "the problem was edited");
    let ran = folder.run(&["resume", "nowhere"]);
    assert!(ran.status == Some(2) && ran.err.contains("there is no run folder nowhere"), "{ran:?}");
    fs::create_dir(folder.path().join("empty")).unwrap();
    let ran = folder.run(&["resume", "empty"]);
    assert!(ran.status == Some(2) && ran.err.contains("there is no file empty/run.json"), "{ran:?}");
    assert_eq!(resume(&folder, &["--evals", "4000"]).status, Some(0), "and the run is as good as it was");
}

/// A file-size limit is a disk that is full from some byte on. Wherever that is, the results are shown, the status tells, and
/// a resume with room ends as if nothing had been.
#[test]
fn a_full_disk_loses_nothing() {
    let expected = read(&hunted(&["--evals", "1e4"]));
    let mut starved = 0;
    let size = expected[2].len();
    // dash and others count 512 bytes, bash 1,024.
    for blocks in [1, 6, 8, 10, 13, 16, 20, 25, 30, 40, 60].into_iter().filter(|blocks| blocks * 512 < size) {
        let folder = Folder::new();
        folder.put("problem.land", PORE);
        let script = "trap '' XFSZ; ulimit -S -f \"$1\"; shift; exec \"$@\"";
        let ran = Command::new("sh")
            .args(["-c", script, "sh", &blocks.to_string(), env!("CARGO_BIN_EXE_thalweg")])
            .args(["hunt", "problem.land", "--quiet", "--evals", "1e4"])
            .current_dir(folder.path())
            .output()
            .unwrap();
        let (out, err) = (String::from_utf8(ran.stdout).unwrap(), String::from_utf8(ran.stderr).unwrap());
        if !run_path(&folder).join("run.json").exists() {
            assert!(ran.status.code() == Some(3) && err.contains("run.json could not be written"), "{blocks}: {err}");
            continue;
        }
        if ran.status.code() == Some(0) {
            demand_same(&folder, &expected, "room enough");
            continue;
        }
        starved += 1;
        assert_eq!(ran.status.code(), Some(3), "{blocks}: {err}");
        assert!(out.contains("lowest value met: -16.505384"), "{blocks}: {out}");
        assert!(err.contains("could not be written"), "{blocks}: {err}");
        let ran = resume(&folder, &["--evals", "1e4"]);
        assert_eq!(ran.status, Some(0), "{blocks}: {ran:?}");
        demand_same(&folder, &expected, &format!("{blocks} blocks"));
    }
    assert!(starved >= 3, "{starved} of the limits mattered");
}

#[test]
fn a_removed_folder_leaves_the_results_on_the_screen() {
    let folder = Folder::new();
    folder.put("problem.land", PORE);
    let child = start(&folder, &["hunt", "problem.land", "--for", "10m"]);
    wait_for_journal(&folder, 4000);
    fs::remove_dir_all(run_path(&folder)).unwrap();
    signal(&child, "TERM");
    let (status, out, err) = finish(child);
    assert_eq!(status, Some(3), "{out}{err}");
    assert!(out.contains("lowest value met: -1") && err.contains("could not be written"), "{out}{err}");
}

/// While its folder is away the hunt goes on and says so; once it is back, so are the files.
#[test]
fn a_folder_that_comes_back_is_written_again() {
    let folder = Folder::new();
    folder.put("problem.land", PORE);
    let child = start(&folder, &["hunt", "problem.land", "--for", "10m", "--quiet", "--threads", "1"]);
    wait_for_journal(&folder, 2000);
    let away = folder.path().join("results/away");
    fs::rename(run_path(&folder), &away).unwrap();
    std::thread::sleep(Duration::from_secs(6));
    fs::rename(&away, run_path(&folder)).unwrap();
    std::thread::sleep(Duration::from_secs(2));
    signal(&child, "INT");
    let (status, out, err) = finish(child);
    assert_eq!(status, Some(0), "{out}{err}");
    assert!(err.contains("goes on in memory") && err.ends_with("Everything is written again.\n"), "{err}");
    let evaluations = end(&folder)["evaluations"].as_u64().unwrap();
    let ran = resume(&folder, &["--evals", &(evaluations + 5000).to_string()]);
    assert_eq!((ran.status, ran.err.as_str()), (Some(0), ""), "{ran:?}");
}

#[test]
fn signals_end_a_hunt_with_its_results() {
    for name in ["INT", "TERM", "HUP"] {
        let folder = Folder::new();
        folder.put("problem.land", PORE);
        let child = start(&folder, &["hunt", "problem.land", "--for", "10m", "--quiet"]);
        wait_for_journal(&folder, 2000);
        signal(&child, name);
        let (status, out, err) = finish(child);
        assert_eq!((status, err.as_str()), (Some(0), ""), "{name}: {out}");
        assert!(out.contains("Interrupted; the results are in"), "{name}: {out}");
        assert_eq!(end(&folder)["reason"], "interrupted", "{name}");
        // An interrupted hunt goes on under the budget that it had.
        let child = start(&folder, &["resume", "problem", "--quiet"]);
        std::thread::sleep(Duration::from_millis(300));
        signal(&child, name);
        let (status, out, err) = finish(child);
        assert_eq!(status, Some(0), "{name}: {out}{err}");
    }
}

/// The second interrupt does not wait; what the journal has can be gone on from.
#[test]
fn a_second_interrupt_ends_at_once() {
    let folder = Folder::new();
    folder.put("problem.land", PORE);
    // Forty atoms: the closing has many confirmations to do and takes long.
    let options = ["--given", "n=40", "--mix", "multistart", "--name", "problem", "--threads", "1", "--quiet"];
    let child = start(&folder, &[&["hunt", "problem.land", "--for", "10m"], &options[..]].concat());
    wait_for_journal(&folder, 600_000);
    signal(&child, "INT");
    std::thread::sleep(Duration::from_millis(300));
    signal(&child, "INT");
    let (status, out, err) = finish(child);
    assert_eq!((status, out.as_str()), (Some(130), ""), "{err}");
    let evaluations = json_line(&run_path(&folder).join("journal.jsonl"));
    let ran = resume(&folder, &["--evals", &evaluations.to_string()]);
    assert_eq!(ran.status, Some(0), "{ran:?}");
}

/// The evaluations of a journal's first line.
fn json_line(journal: &Path) -> u64 {
    let text = fs::read_to_string(journal).unwrap();
    let line: Value = serde_json::from_str(text.lines().next().unwrap()).unwrap();
    line["entry"]["evaluations"].as_u64().unwrap()
}

/// Nobody reads what is printed: the files have it all the same.
#[test]
fn a_broken_pipe_loses_nothing() {
    let expected = read(&hunted(&["--evals", "1e4"]));
    let folder = Folder::new();
    folder.put("problem.land", PORE);
    let mut child = start(&folder, &["hunt", "problem.land", "--evals", "1e4"]);
    drop((child.stdout.take(), child.stderr.take()));
    assert_eq!(child.wait().unwrap().code(), Some(0));
    demand_same(&folder, &expected, "nobody reads");
}

/// Two processes on one run: the second is refused, and a crash leaves no lock.
#[test]
fn a_run_is_worked_on_by_one_process() {
    let folder = Folder::new();
    folder.put("problem.land", PORE);
    let mut child = start(&folder, &["hunt", "problem.land", "--evals", "1e9", "--quiet"]);
    wait_for_journal(&folder, 2000);
    let look = folder.run(&["look", "problem"]);
    assert!(look.out.contains("hunting") && look.out.contains("of 1.00 billion evaluations"), "{look:?}");
    let status: Value = serde_json::from_str(&folder.run(&["look", "problem", "--json"]).out).unwrap();
    assert!(status["state"] == "hunting" && status["distinct"].as_u64() > Some(0), "{status}");
    let ran = resume(&folder, &["--evals", "3000"]);
    assert_eq!((ran.status, ran.out.as_str()), (Some(2), ""), "{ran:?}");
    assert!(ran.err.contains("another process is at work on results/problem"), "{}", ran.err);
    child.kill().unwrap();
    child.wait().unwrap();
    let look = folder.run(&["look", "problem"]);
    assert!(look.status == Some(0) && look.out.contains("not at work"), "{look:?}");
    let ran = resume(&folder, &["--evals", "3000"]);
    assert_eq!(ran.status, Some(0), "{ran:?}");
    let look = folder.run(&["look", "problem"]);
    assert!(look.status == Some(0) && look.out.contains("ended: its evaluations were spent"), "{look:?}");
}
