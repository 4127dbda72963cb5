//! `join`: the parts of a shared-out sweep become one file.

use std::fs::File;
use std::io::{self, BufRead as _, BufReader, Read, Seek as _, SeekFrom};
use std::ops::Range;
use std::path::{Path, PathBuf};

use clap::Args as ClapArgs;
use twincone::sweep::Slice;

use super::failure::Failure;
use super::output::{Outcome, OutputArgs};
use super::sweep_file::{Contents, Leftover, SweepFile, differences, meta_path, point_of, unfinished_path};

/// Options of `join`.
#[derive(Debug, ClapArgs)]
pub struct Args {
    /// The file to write, as it was named with --output: for rows.csv the parts rows.001-of-008.csv and so on are joined
    #[arg(value_name = "OUTPUT")]
    rows: PathBuf,
}

/// Checks the parts and joins them.
///
/// # Errors
/// A part that is missing, unfinished, or of another job; file trouble.
pub fn run(args: &Args, output: &OutputArgs) -> Result<Outcome, Failure> {
    if output.output.is_some() || output.format.is_some() {
        return Err(Failure::usage(
            "join writes the csv file that it is given; leave --output and --format out",
        ));
    }
    let parts = find(&args.rows)?;
    let first = Part::open(&parts[0])?;
    let whole = first.meta_of_whole()?;
    let header = first.header.clone();
    let contents = Contents { header: header.as_bytes(), meta: &whole, points: 0..first.points };
    let mut checked = Vec::with_capacity(parts.len());
    for path in &parts {
        let part = Part::open(path)?;
        part.check(&whole, &header, checked.len() as u64 + 1, parts.len() as u64)?;
        checked.push(part);
    }
    // what a join left behind that was killed is worth nothing: the parts are still there
    let Some(mut out) = SweepFile::open(&args.rows, &contents, Leftover::Restart)? else {
        return Ok(Outcome::written());
    };
    for part in checked {
        part.copy(&mut out)?;
    }
    out.finish()?;
    Ok(Outcome::written())
}

/// More parts are not looked for.
pub const MOST_PARTS: u64 = 1_000_000;

/// The parts of a file, in order: all of them, of one sharing-out.
fn find(rows: &Path) -> Result<Vec<PathBuf>, Failure> {
    let dir = match rows.parent() {
        Some(dir) if !dir.as_os_str().is_empty() => dir,
        _ => Path::new("."),
    };
    let stem = rows.file_stem().and_then(|s| s.to_str()).unwrap_or_default();
    let mut sharings: Vec<u64> = Vec::new();
    let entries =
        std::fs::read_dir(dir).map_err(|e| Failure::file("read", &dir.display().to_string(), &e))?;
    for entry in entries.filter_map(Result::ok) {
        let name = entry.file_name();
        let numbers = name.to_str().and_then(|n| n.strip_prefix(stem)?.strip_prefix('.'));
        let numbers = numbers.and_then(|n| n.strip_suffix(".unfinished").unwrap_or(n).strip_suffix(".csv"));
        let numbers = numbers.and_then(|n| n.split_once("-of-"));
        let numbers =
            numbers.and_then(|(part, of)| Some((part.parse::<u64>().ok()?, of.parse::<u64>().ok()?)));
        if let Some((part, of)) = numbers
            && (1..=of).contains(&part)
            && of <= MOST_PARTS
            && !sharings.contains(&of)
        {
            sharings.push(of);
        }
    }
    sharings.sort_unstable();
    let shown = rows.display();
    let of = match sharings.as_slice() {
        [] => {
            let example = Slice { part: 1, of: 8 }.file(rows);
            return Err(Failure {
                status: 4,
                message: format!("there are no parts of {shown}, such as {}", example.display()),
            });
        }
        [of] => *of,
        several => {
            let all: Vec<String> = several.iter().map(u64::to_string).collect();
            return Err(Failure::usage(format!(
                "there are parts of {shown} from several runs, of {} parts; remove those that are not wanted",
                all.join(" and ")
            )));
        }
    };
    let all: Vec<PathBuf> = (1..=of).map(|part| Slice { part, of }.file(rows)).collect();
    let missing: Vec<&PathBuf> = all.iter().filter(|path| !path.exists()).collect();
    match missing.as_slice() {
        [] => Ok(all),
        [first, ..] => {
            let unfinished = unfinished_path(first).exists();
            let state = if unfinished {
                "is not finished: run that part with --resume"
            } else {
                "is missing: run that part"
            };
            let more = if missing.len() > 1 {
                format!(" ({} of {of} parts are not there)", missing.len())
            } else {
                String::new()
            };
            Err(Failure { status: 4, message: format!("{} {state}{more}", first.display()) })
        }
    }
}

/// One part with what stands beside it.
struct Part {
    path: PathBuf,
    meta: toml::Table,
    header: String,
    points: u64,
}

impl Part {
    fn open(path: &Path) -> Result<Self, Failure> {
        let beside = meta_path(path);
        let text = std::fs::read_to_string(&beside)
            .map_err(|e| Failure::file("read", &beside.display().to_string(), &e))?;
        let meta: toml::Table =
            text.parse().map_err(|_| foreign(path, &format!("{} is damaged", beside.display())))?;
        let points = meta.get("points").and_then(toml::Value::as_integer).and_then(|n| u64::try_from(n).ok());
        let points = points
            .filter(|count| *count > 0)
            .ok_or_else(|| foreign(path, "the file beside it does not say how many points there are"))?;
        let mut header = String::new();
        let file = File::open(path).map_err(|e| reading(path, &e))?;
        BufReader::new(file).read_line(&mut header).map_err(|e| reading(path, &e))?;
        Ok(Self { path: path.into(), meta, header, points })
    }

    /// What stands beside the whole sweep.
    fn meta_of_whole(&self) -> Result<String, Failure> {
        let mut meta = self.meta.clone();
        meta.remove("part").ok_or_else(|| foreign(&self.path, "it is not a part of a sweep"))?;
        Ok(toml::to_string(&meta).expect("what was read as TOML is TOML"))
    }

    fn check(&self, whole: &str, header: &str, part: u64, of: u64) -> Result<(), Failure> {
        let own = self.meta_of_whole()?;
        if own != whole || self.header != header {
            return Err(foreign(
                &self.path,
                &format!("it is of another job than part 1: {}", differences(whole, &own)),
            ));
        }
        let points = Slice { part, of }.points(self.points);
        let whole = self.holds(points.clone()).map_err(|e| reading(&self.path, &e))?;
        if !whole {
            return Err(foreign(
                &self.path,
                &format!(
                    "it does not hold points {} to {}: run that part again with --restart",
                    points.start,
                    points.end - 1
                ),
            ));
        }
        Ok(())
    }

    /// Whether the rows hold these points, all of them and in order, and the last row is whole.
    fn holds(&self, points: Range<u64>) -> io::Result<bool> {
        let mut rows = BufReader::with_capacity(1 << 20, File::open(&self.path)?);
        let mut line = Vec::new();
        rows.read_until(b'\n', &mut line)?;
        let mut next = points.start;
        loop {
            line.clear();
            if rows.read_until(b'\n', &mut line)? == 0 {
                return Ok(next == points.end);
            }
            let point = point_of(&line).filter(|_| line.ends_with(b"\n"));
            match point {
                Some(point) if point == next => next += 1,
                Some(point) if point + 1 == next && next > points.start => {}
                _ => return Ok(false),
            }
        }
    }

    fn copy(&self, out: &mut SweepFile) -> Result<(), Failure> {
        let mut file = File::open(&self.path).map_err(|e| reading(&self.path, &e))?;
        file.seek(SeekFrom::Start(self.header.len() as u64)).map_err(|e| reading(&self.path, &e))?;
        let mut block = vec![0; 1 << 20];
        loop {
            match file.read(&mut block).map_err(|e| reading(&self.path, &e))? {
                0 => return Ok(()),
                size => out.write(&block[..size])?,
            }
        }
    }
}

fn reading(path: &Path, error: &io::Error) -> Failure {
    Failure::file("read", &path.display().to_string(), error)
}

/// A file that is no part of this sweep.
fn foreign(path: &Path, why: &str) -> Failure {
    Failure::usage(format!("{} cannot be joined: {why}", path.display()))
}
