//! The file a sweep writes: unfinished while it runs, locked against a second run, whole in the end.
//!
//! `rows.csv.unfinished` grows; `rows.csv.unfinished.meta.toml` beside it says of which job. At the end both take their
//! last names by renaming. A run that was killed leaves whole rows but for the last point, which is written again.

use std::fs::{File, OpenOptions, TryLockError};
use std::io::{self, Read, Seek, SeekFrom, Write};
use std::ops::Range;
use std::path::{Path, PathBuf};

use super::failure::Failure;
use super::output::write_whole;

/// What to do about an unfinished file.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Leftover {
    /// It is an error.
    Refuse,
    /// Go on with it.
    Resume,
    /// Begin anew.
    Restart,
}

/// What the rows are.
pub struct Contents<'a> {
    /// Header line with its newline.
    pub header: &'a [u8],
    /// Text of the file beside them.
    pub meta: &'a str,
    /// Numbers of the points.
    pub points: Range<u64>,
}

/// A file that is being written.
#[derive(Debug)]
pub struct SweepFile {
    file: File,
    target: PathBuf,
    /// Point to go on with.
    pub next: u64,
}

/// `path` with a suffix after its extension.
pub fn with_suffix(path: &Path, suffix: &str) -> PathBuf {
    let mut name = path.as_os_str().to_owned();
    name.push(suffix);
    PathBuf::from(name)
}

pub fn meta_path(path: &Path) -> PathBuf {
    with_suffix(path, ".meta.toml")
}

pub fn unfinished_path(path: &Path) -> PathBuf {
    with_suffix(path, ".unfinished")
}

impl SweepFile {
    /// Opens the file for writing; `None` where it is complete already.
    ///
    /// # Errors
    /// Another run, leftovers of another job, or a file that cannot be written.
    pub fn open(target: &Path, contents: &Contents<'_>, leftover: Leftover) -> Result<Option<Self>, Failure> {
        let unfinished = unfinished_path(target);
        if let Some(taken) = [target.to_path_buf(), meta_path(target)].iter().find(|path| path.is_dir()) {
            let message = format!("cannot write {}: it is a folder; name another file", taken.display());
            return Err(Failure { status: 4, message });
        }
        if leftover == Leftover::Resume && !unfinished.exists() && target.exists() {
            settle_names(target).map_err(|e| file_trouble(target, &e))?;
            compare(target, contents.meta)?;
            return Ok(None);
        }
        let mut file = lock(&unfinished)?;
        let length = file.metadata().map_err(|e| file_trouble(&unfinished, &e))?.len();
        let shown = unfinished.display();
        if length > 0 && leftover == Leftover::Refuse {
            return Err(Failure::usage(format!(
                "{shown} is left from a run that did not end; go on with --resume, or begin anew with --restart"
            )));
        }
        let mut next = contents.points.start;
        let mut keep = 0;
        if length > 0 && leftover == Leftover::Resume {
            compare(&unfinished, contents.meta)?;
            let found = last_point(&mut file, contents).map_err(|e| file_trouble(&unfinished, &e))?;
            (next, keep) = found.ok_or_else(|| {
                Failure::usage(format!("{shown} does not hold rows of this sweep; begin anew with --restart"))
            })?;
        }
        let mut begin = || -> io::Result<()> {
            file.set_len(keep)?;
            file.seek(SeekFrom::End(0))?;
            if keep == 0 {
                write_whole(&meta_path(&unfinished), contents.meta.as_bytes())?;
                file.write_all(contents.header)?;
            }
            Ok(())
        };
        begin().map_err(|e| file_trouble(&unfinished, &e))?;
        Ok(Some(Self { file, target: target.into(), next }))
    }

    /// Adds rows.
    ///
    /// # Errors
    /// What the system says.
    pub fn write(&mut self, bytes: &[u8]) -> Result<(), Failure> {
        self.file.write_all(bytes).map_err(|e| {
            let shown = unfinished_path(&self.target);
            let message = format!(
                "cannot write {}: {e}; the rows so far are kept: go on with --resume when that is mended",
                shown.display()
            );
            Failure { status: 4, message }
        })
    }

    /// Gives the file its name.
    ///
    /// # Errors
    /// What the system says.
    pub fn finish(self) -> Result<(), Failure> {
        let unfinished = unfinished_path(&self.target);
        let done = self.file.sync_data().and_then(|()| std::fs::rename(&unfinished, &self.target));
        done.and_then(|()| settle_names(&self.target)).map_err(|e| file_trouble(&self.target, &e))
    }
}

fn file_trouble(path: &Path, error: &io::Error) -> Failure {
    Failure::file("write", &path.display().to_string(), error)
}

/// The file beside finished rows takes its last name after they have: a run may have been killed in between.
fn settle_names(target: &Path) -> io::Result<()> {
    let left = meta_path(&unfinished_path(target));
    if left.exists() { std::fs::rename(left, meta_path(target)) } else { Ok(()) }
}

/// Opens and locks; the lock goes with the process.
fn lock(unfinished: &Path) -> Result<File, Failure> {
    let trouble = |e: &io::Error| file_trouble(unfinished, e);
    let busy = || Failure {
        status: 4,
        message: format!(
            "{} is being written by another run; let it end, or name another file",
            unfinished.display()
        ),
    };
    let open = OpenOptions::new().read(true).write(true).create(true).truncate(false).open(unfinished);
    let file = open.map_err(|e| trouble(&e))?;
    match file.try_lock() {
        Ok(()) => {}
        Err(TryLockError::WouldBlock) => return Err(busy()),
        Err(TryLockError::Error(e)) => return Err(trouble(&e)),
    }
    // the other run may have ended, and renamed the file, between opening and locking
    if same_file(&file, unfinished).map_err(|e| trouble(&e))? { Ok(file) } else { Err(busy()) }
}

#[cfg(unix)]
fn same_file(file: &File, path: &Path) -> io::Result<bool> {
    use std::os::unix::fs::MetadataExt as _;
    let own = file.metadata()?;
    Ok(std::fs::metadata(path).is_ok_and(|there| there.ino() == own.ino() && there.dev() == own.dev()))
}

#[cfg(not(unix))]
fn same_file(_: &File, path: &Path) -> io::Result<bool> {
    Ok(path.exists())
}

/// Refuses rows that another job or another version has made.
fn compare(rows: &Path, meta: &str) -> Result<(), Failure> {
    let path = meta_path(rows);
    let there = std::fs::read_to_string(&path).map_err(|_| {
        Failure::usage(format!(
            "{} has no {} beside it, so nothing says which job it is of; begin anew with --restart",
            rows.display(),
            path.display()
        ))
    })?;
    if there == meta {
        return Ok(());
    }
    Err(Failure::usage(format!(
        "{} is of another job: {}; begin anew with --restart, or name another file",
        rows.display(),
        differences(&there, meta)
    )))
}

/// Which keys of two files differ, with their values: old, new.
pub fn differences(old: &str, new: &str) -> String {
    const SHOWN: usize = 4;
    let flat = |text: &str| {
        let mut all = Vec::new();
        if let Ok(table) = text.parse::<toml::Table>() {
            flatten("", &toml::Value::Table(table), &mut all);
        }
        all
    };
    let (old, new) = (flat(old), flat(new));
    let value = |all: &[(String, String)], key: &str| {
        all.iter().find(|(k, _)| k == key).map_or("nothing".to_string(), |(_, v)| v.clone())
    };
    let mut keys: Vec<&String> = old.iter().chain(&new).map(|(key, _)| key).collect();
    keys.sort();
    keys.dedup();
    keys.retain(|key| {
        value(&old, key) != value(&new, key) && !key.starts_with("column") && !key.starts_with("dataset")
    });
    let mut shown: Vec<String> = keys
        .iter()
        .take(SHOWN)
        .map(|key| {
            format!("{} was {}, now {}", key.trim_start_matches("job."), value(&old, key), value(&new, key))
        })
        .collect();
    if keys.len() > SHOWN {
        shown.push(format!("and {} more keys", keys.len() - SHOWN));
    }
    if shown.is_empty() { "its data sets or material files differ".into() } else { shown.join("; ") }
}

fn flatten(path: &str, value: &toml::Value, out: &mut Vec<(String, String)>) {
    let below = |key: &str| if path.is_empty() { key.to_string() } else { format!("{path}.{key}") };
    match value {
        toml::Value::Table(table) => table.iter().for_each(|(key, value)| flatten(&below(key), value, out)),
        toml::Value::Array(items) if items.iter().any(toml::Value::is_table) => {
            items.iter().enumerate().for_each(|(n, item)| flatten(&below(&(n + 1).to_string()), item, out));
        }
        other => out.push((path.into(), other.to_string())),
    }
}

/// The last point of which rows are there, and where they begin: they are written again. `None` where the rows are not
/// of these contents.
fn last_point(file: &mut File, contents: &Contents<'_>) -> io::Result<Option<(u64, u64)>> {
    let length = file.metadata()?.len();
    let header = contents.header.len() as u64;
    let mut head = vec![0; header.min(length) as usize];
    file.seek(SeekFrom::Start(0))?;
    file.read_exact(&mut head)?;
    if head != contents.header {
        // killed within the header: begin anew
        let torn = contents.header.starts_with(&head);
        return Ok(torn.then_some((contents.points.start, 0)));
    }
    let mut size = 1 << 16;
    loop {
        let from = length.saturating_sub(size).max(header);
        let mut tail = vec![0; (length - from) as usize];
        file.seek(SeekFrom::Start(from))?;
        file.read_exact(&mut tail)?;
        let whole = tail.iter().rposition(|b| *b == b'\n').map_or(0, |at| at + 1);
        let starts = line_starts(&tail[..whole], from == header);
        let Some(last) = starts.last().and_then(|at| point_of(&tail[*at..])) else {
            if from == header {
                // no whole row
                return Ok((whole == 0).then_some((contents.points.start, header)));
            }
            size *= 2;
            continue;
        };
        if !contents.points.contains(&last) {
            return Ok(None);
        }
        let first = starts.iter().rev().take_while(|at| point_of(&tail[**at..]) == Some(last)).last();
        match first {
            // the point may have rows before this tail
            Some(at) if *at == starts[0] && from > header => size *= 2,
            Some(at) => return Ok(Some((last, from + *at as u64))),
            None => return Ok(None),
        }
    }
}

/// Where lines begin; the first piece of a tail is one only where the tail begins with a row.
fn line_starts(tail: &[u8], whole: bool) -> Vec<usize> {
    let after_newlines = tail.iter().enumerate().filter(|(_, b)| **b == b'\n').map(|(at, _)| at + 1);
    let first = (whole && !tail.is_empty()).then_some(0);
    first.into_iter().chain(after_newlines).filter(|at| *at < tail.len()).collect()
}

/// The number that a line begins with.
pub fn point_of(line: &[u8]) -> Option<u64> {
    let end = line.iter().position(|b| *b == b',')?;
    std::str::from_utf8(&line[..end]).ok()?.parse().ok()
}
