//! Sweeps that do not run to their end: killed, stopped, out of space, cut off; and what becomes of their files.

use std::fs;
use std::io::{BufRead, BufReader};
use std::path::Path;
use std::process::{Child, Command, Stdio};
use std::time::Duration;

use tempfile::TempDir;

use crate::run::{Run, assert_says, twincone_in, words};

const SWEEP: &str = "run -m bbo:kato-1986 -p 405nm --theta 42.541deg --phi 0deg --report rings --axis crystal.tilt=-1deg..2deg/8001";

fn run(folder: &Path, options: &str) -> Run {
    twincone_in(folder, &format!("{SWEEP} {options}"))
}

fn start(folder: &Path, options: &str) -> Child {
    let mut command = Command::new(env!("CARGO_BIN_EXE_twincone"));
    command.args(words(&format!("{SWEEP} {options}"))).env_clear().current_dir(folder);
    command.stdout(Stdio::piped()).stderr(Stdio::piped()).spawn().expect("the program starts")
}

/// Waits until the unfinished file has grown beyond `size`, or the run has ended.
fn wait_for(folder: &Path, child: &mut Child, size: u64) {
    for _ in 0..4000 {
        let grown = fs::metadata(folder.join("rows.csv.unfinished")).is_ok_and(|m| m.len() > size);
        if grown || child.try_wait().expect("a child").is_some() {
            return;
        }
        std::thread::sleep(Duration::from_millis(2));
    }
}

fn read(folder: &Path, name: &str) -> String {
    fs::read_to_string(folder.join(name)).unwrap_or_else(|e| panic!("{name}: {e}"))
}

/// Killed at many moments and resumed each time, the file has the bytes of a run that was left alone.
#[test]
fn a_killed_sweep_resumes_to_the_same_bytes() {
    let folder = TempDir::new().expect("a folder");
    let folder = folder.path();
    let whole = run(folder, "").answer();
    let mut kills = 0;
    for size in [0, 1, 5_000, 60_000, 300_000, 700_000, 1_500_000] {
        let mut child = start(folder, "-o rows.csv --resume");
        wait_for(folder, &mut child, size);
        kills += i32::from(child.try_wait().expect("a child").is_none());
        let _ = child.kill();
        child.wait().expect("a child");
        assert!(
            kills == 0 || folder.join("rows.csv.unfinished").exists() || folder.join("rows.csv").exists()
        );
    }
    assert!(kills >= 3, "the sweep is too short to be killed");
    run(folder, "-o rows.csv --resume").answer();
    assert!(read(folder, "rows.csv") == whole);
    assert!(
        !folder.join("rows.csv.unfinished").exists()
            && !folder.join("rows.csv.unfinished.meta.toml").exists()
    );
    // once more changes nothing
    let before = fs::metadata(folder.join("rows.csv")).and_then(|m| m.modified()).expect("a time");
    run(folder, "-o rows.csv --resume").answer();
    assert_eq!(fs::metadata(folder.join("rows.csv")).and_then(|m| m.modified()).expect("a time"), before);
}

/// Whatever byte the file was cut at, resuming gives the whole file.
#[test]
fn a_file_torn_at_any_byte_is_mended() {
    let folder = TempDir::new().expect("a folder");
    let folder = folder.path();
    let short = "run -m bbo:kato-1986 -p 405nm --theta 42.541deg --phi 0deg --report rings --axis crystal.tilt=0deg..2deg/5 -o rows.csv";
    twincone_in(folder, short).answer();
    let whole = read(folder, "rows.csv");
    let meta = read(folder, "rows.csv.meta.toml");
    for cut in (0..=whole.len()).step_by(13).chain([whole.len()]) {
        fs::remove_file(folder.join("rows.csv")).expect("it is there");
        fs::remove_file(folder.join("rows.csv.meta.toml")).expect("it is there");
        fs::write(folder.join("rows.csv.unfinished"), &whole[..cut]).expect("a file");
        fs::write(folder.join("rows.csv.unfinished.meta.toml"), &meta).expect("a file");
        twincone_in(folder, &format!("{short} --resume")).answer();
        assert!(read(folder, "rows.csv") == whole, "cut at {cut}");
    }
}

/// Killed between the two renamings: the file beside the rows gets its name with the next resume.
#[test]
fn a_kill_between_the_last_two_steps_is_mended() {
    let folder = TempDir::new().expect("a folder");
    let folder = folder.path();
    run(folder, "-o rows.csv").answer();
    fs::rename(folder.join("rows.csv.meta.toml"), folder.join("rows.csv.unfinished.meta.toml"))
        .expect("renamed");
    run(folder, "-o rows.csv --resume").answer();
    assert!(
        folder.join("rows.csv.meta.toml").exists() && !folder.join("rows.csv.unfinished.meta.toml").exists()
    );
}

#[test]
fn leftovers_are_an_error_unless_told_what_to_do() {
    let folder = TempDir::new().expect("a folder");
    let folder = folder.path();
    let mut child = start(folder, "-o rows.csv");
    wait_for(folder, &mut child, 50_000);
    let _ = child.kill();
    child.wait().expect("a child");
    let left = read(folder, "rows.csv.unfinished");
    let refusal = run(folder, "-o rows.csv").refusal(2);
    assert_says(&refusal, &["rows.csv.unfinished", "--resume", "--restart"]);
    // another job does not go on with it, and says what differs
    let refusal = run(folder, "-o rows.csv --resume --roll 3deg").refusal(2);
    assert_says(&refusal, &["of another job", "crystal.1.roll was nothing, now \"3deg\""]);
    assert_eq!(read(folder, "rows.csv.unfinished"), left, "nothing is lost");
    // another version neither
    let meta = read(folder, "rows.csv.unfinished.meta.toml");
    let older = meta.replace(env!("CARGO_PKG_VERSION"), "0.0.9");
    fs::write(folder.join("rows.csv.unfinished.meta.toml"), older).expect("a file");
    assert_says(&run(folder, "-o rows.csv --resume").refusal(2), &["version was \"0.0.9\""]);
    run(folder, "-o rows.csv --restart").answer();
    assert!(read(folder, "rows.csv") == run(folder, "").answer());
    // a finished file of another job is not taken for this one's
    assert_says(&run(folder, "-o rows.csv --resume --roll 3deg").refusal(2), &["of another job"]);
    // nothing there: start
    fs::remove_file(folder.join("rows.csv")).expect("it is there");
    run(folder, "-o rows.csv --resume").answer();
}

#[test]
fn two_runs_to_one_file_do_not_mix() {
    let folder = TempDir::new().expect("a folder");
    let folder = folder.path();
    let mut child = start(folder, "-o rows.csv");
    wait_for(folder, &mut child, 0);
    for option in ["", "--resume", "--restart"] {
        if child.try_wait().expect("a child").is_some() {
            panic!("the sweep is too short to be met");
        }
        let refusal = run(folder, &format!("-o rows.csv {option}")).refusal(4);
        assert_says(&refusal, &["is being written by another run"]);
    }
    assert!(child.wait().expect("a child").success());
    assert!(read(folder, "rows.csv") == run(folder, "").answer());
}

/// The first request to end lets whole points be written and says how to go on.
#[cfg(unix)]
#[test]
fn an_interrupt_leaves_a_file_to_go_on_with() {
    for signal in ["INT", "TERM"] {
        let folder = TempDir::new().expect("a folder");
        let folder = folder.path();
        let mut child = start(folder, "-o rows.csv");
        wait_for(folder, &mut child, 1000);
        let killed = Command::new("kill").args([&format!("-{signal}"), &child.id().to_string()]).status();
        assert!(killed.expect("kill").success());
        let ended = child.wait_with_output().expect("a child");
        assert_eq!(ended.status.code(), Some(130));
        assert_says(
            &String::from_utf8_lossy(&ended.stderr),
            &["stopped after", "of 8001 points", "--resume"],
        );
        let left = read(folder, "rows.csv.unfinished");
        assert!(left.ends_with('\n'), "whole rows only");
        run(folder, "-o rows.csv --resume").answer();
        assert!(read(folder, "rows.csv") == run(folder, "").answer());
    }
}

#[test]
fn a_closed_pipe_ends_a_sweep_quietly() {
    let folder = TempDir::new().expect("a folder");
    let mut child = start(folder.path(), "");
    let mut lines = BufReader::new(child.stdout.take().expect("a pipe")).lines();
    assert!(lines.next().expect("a header").expect("a line").starts_with("point,"));
    drop(lines);
    let ended = child.wait_with_output().expect("a child");
    assert_eq!(ended.status.code(), Some(0));
    assert_eq!(String::from_utf8_lossy(&ended.stderr), "");
    assert_eq!(fs::read_dir(folder.path()).expect("a folder").count(), 0, "a pipe leaves no files");
}

#[test]
fn a_folder_that_cannot_be_written_is_said() {
    let folder = TempDir::new().expect("a folder");
    assert_says(&run(folder.path(), "-o nowhere/rows.csv").refusal(4), &["cannot write", "nowhere/rows.csv"]);
}

/// On a file system that is full the rows so far are kept, and the sweep goes on when there is space again. Needs the
/// right to mount; where that is missing the device that is always full stands in.
#[cfg(target_os = "linux")]
#[test]
fn a_full_disk_keeps_the_rows_so_far() {
    let folder = TempDir::new().expect("a folder");
    let small = folder.path().join("small");
    fs::create_dir(&small).expect("a folder");
    let mount = |size: &str, how: &str| {
        let options = format!("{how}size={size}");
        let mounted = Command::new("mount")
            .args(["-t", "tmpfs", "-o", &options, "tmpfs"])
            .arg(&small)
            .stderr(Stdio::null())
            .status();
        mounted.is_ok_and(|status| status.success())
    };
    if !mount("200k", "") {
        fs::remove_dir(&small).expect("it is empty");
        std::os::unix::fs::symlink("/dev/full", folder.path().join("rows.csv.unfinished")).expect("a link");
        assert_says(&run(folder.path(), "-o rows.csv").refusal(4), &["cannot write"]);
        return;
    }
    let refusal = run(&small, "-o rows.csv").refusal(4);
    assert_says(&refusal, &["cannot write rows.csv.unfinished", "the rows so far are kept", "--resume"]);
    assert!(fs::metadata(small.join("rows.csv.unfinished")).expect("it is kept").len() > 50_000);
    assert!(mount("20m", "remount,"));
    run(&small, "-o rows.csv --resume").answer();
    let written = read(&small, "rows.csv");
    let unmounted = Command::new("umount").arg(&small).status().expect("umount");
    assert!(unmounted.success());
    assert!(written == run(folder.path(), "").answer());
}
