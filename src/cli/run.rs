//! `run`: a report at every point of a grid, as CSV.

use std::io::{self, Write as _};
use std::ops::Range;
use std::path::{Path, PathBuf};
use std::sync::Mutex;
use std::sync::atomic::{AtomicBool, Ordering};
use std::time::{Duration, Instant};

use clap::Args as ClapArgs;
use rayon::prelude::*;
use twincone::job::Document;
use twincone::job::plan::Report;
use twincone::report::Conventions;
use twincone::sweep::{Piece, Slice, Sweep, Tally, Worker, meta};

use super::cut::{Sought, TargetArgs};
use super::failure::Failure;
use super::join::MOST_PARTS;
use super::options::{ExperimentArgs, attach_curves, catalogue};
use super::output::{Format, Outcome, OutputArgs};
use super::progress::Progress;
use super::state::Choice;
use super::sweep_file::{Contents, Leftover, SweepFile};
use super::tilt::By;

/// Options of `run`.
#[derive(Debug, ClapArgs)]
pub struct Args {
    /// Job file with a [sweep], or - for standard input
    #[arg(value_name = "JOB", conflicts_with = "job")]
    file: Option<PathBuf>,
    /// Rows to write: cut, rings, crossings, tilt, state or compensate [default: the job's]
    #[arg(long, value_name = "REPORT")]
    report: Option<String>,
    /// An axis, repeatable, the last one fastest: KEY=FROM..TO/POINTS, KEY=FROM..TO/STEP or KEY=A,B,C, for example
    /// crystal.tilt=-1deg..4deg/501; replaces the job's axes
    #[arg(long, value_name = "KEY=VALUES")]
    axis: Vec<String>,
    #[command(flatten)]
    target: TargetArgs,
    /// Report tilt: the rings touch
    #[arg(long, conflicts_with = "TargetArgs")]
    touching: bool,
    /// Report tilt: what to change
    #[arg(long, value_enum)]
    by: Option<By>,
    /// Report cut: what to solve for
    #[arg(long, value_enum)]
    find: Option<Sought>,
    /// Reports state and compensate: which pair of crossings
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u16).range(1..))]
    pair: Option<u16>,
    /// Report state: oe or lab [default: both]
    #[arg(long, value_enum)]
    basis: Option<Choice>,
    /// Report compensate: plates stand between half-wave plates at 45 deg
    #[arg(long)]
    half_wave: bool,
    /// Go on with an unfinished file; start where there is none
    #[arg(long, conflicts_with = "restart", requires = "output")]
    resume: bool,
    /// Throw an unfinished file away and begin anew
    #[arg(long, requires = "output")]
    restart: bool,
    /// Part K of N, from 1, into a file of its own: rows.003-of-040.csv; see `join`
    #[arg(long, value_name = "K/N", requires = "output")]
    part: Option<String>,
    #[command(flatten)]
    experiment: ExperimentArgs,
}

/// Runs a sweep into a file or a pipe.
///
/// # Errors
/// What is missing or wrong in job and axes, file trouble, or that it was stopped.
pub fn run(args: &Args, output: &OutputArgs) -> Result<Outcome, Failure> {
    let document = args.document()?;
    let catalogue = catalogue(output, &document)?;
    let sweep = Sweep::new(&document, &catalogue)?;
    if let Some(setup) = sweep.first_setup() {
        args.experiment.write_job(&setup)?;
    }
    let slice = args.part.as_deref().map_or(Ok(Slice::WHOLE), |text| part(text, sweep.count()))?;
    let target = output.sweep_target()?.map(|path| slice.file(path));
    if !output.quiet {
        warnings(&sweep).iter().for_each(|warning| output.warn(warning));
    }
    let points = slice.points(sweep.count());
    let header = sweep.header();
    let meta = meta(&sweep, slice)?;
    let contents = Contents { header: &header, meta: &meta, points: points.clone() };
    let Some((mut sink, from)) = args.open(target.as_deref(), &contents)? else {
        return Ok(Outcome::written());
    };
    let left = from..points.end;
    let progress = Progress::new(points.end - points.start, from - points.start, output.quiet);
    let engine = Engine { sweep: &sweep, progress: &progress };
    let outcome = output.on_threads(|| engine.run(left, &mut sink))?;
    progress.clear();
    let tally = outcome?;
    if let Sink::File(file) = sink {
        file.finish()?;
    }
    if progress.is_shown() {
        super::output::to_stderr(&summary(&tally));
    } else if let (Some(why), false) = (never(&tally), output.quiet) {
        output.warn(&why);
    }
    Ok(Outcome::written())
}

/// What a person may not expect of the sweep, and of the crystals of its first point.
fn warnings(sweep: &Sweep<'_>) -> Vec<String> {
    let about_pairs = matches!(sweep.report(), Report::State | Report::Compensate);
    let conventions = sweep.first_setup().map(|setup| match about_pairs {
        true => Conventions::of_pairs(&setup),
        false => Conventions::of(&setup),
    });
    let mut all = sweep.warnings();
    // rows say for themselves which of them are extrapolated
    let general = |warning: &String| !warning.starts_with("extrapolated");
    all.extend(conventions.map(|c| c.warnings).unwrap_or_default().into_iter().filter(general));
    all
}

/// Why, where no point can be.
fn never(tally: &Tally) -> Option<String> {
    let (point, why) = tally.first_fault.as_ref()?;
    let all_invalid = tally.points.keys().all(|status| *status == "invalid");
    all_invalid.then(|| format!("no point can be; the first, {point}: {why}"))
}

/// "1000 points: 990 ok, 10 apart".
fn summary(tally: &Tally) -> String {
    let total: u64 = tally.points.values().sum();
    let counts: Vec<String> =
        tally.points.iter().map(|(status, count)| format!("{count} {status}")).collect();
    let mut text = format!("{total} points: {}\n", counts.join(", "));
    if let Some((point, why)) = &tally.first_fault {
        text.push_str(&format!("the first point without an answer is {point}: {why}\n"));
    }
    text
}

/// Where rows go.
enum Sink {
    Pipe(io::Stdout),
    File(SweepFile),
}

/// What became of a batch of rows.
#[derive(PartialEq, Eq)]
enum Taken {
    Yes,
    /// Nobody reads any more.
    Closed,
}

impl Sink {
    fn write(&mut self, bytes: &[u8]) -> Result<Taken, Failure> {
        match self {
            Self::File(file) => file.write(bytes).map(|()| Taken::Yes),
            Self::Pipe(out) => match out.write_all(bytes).and_then(|()| out.flush()) {
                Ok(()) => Ok(Taken::Yes),
                Err(e) if e.kind() == io::ErrorKind::BrokenPipe => Ok(Taken::Closed),
                Err(e) => Err(Failure::file("write to", "standard output", &e)),
            },
        }
    }
}

/// Set by Ctrl-C and by a request to end.
static STOP: AtomicBool = AtomicBool::new(false);

/// The first request lets the sweep end after whole points; the second ends at once.
fn listen() {
    // a second sweep in one process finds the handler in place
    let _ = ctrlc::set_handler(|| {
        if STOP.swap(true, Ordering::Relaxed) {
            std::process::exit(i32::from(STOPPED));
        }
        super::output::to_stderr("stopping after the points under way; once more ends at once\n");
    });
}

/// Exit status after Ctrl-C, as shells have it.
const STOPPED: u8 = 130;

/// Computes batches of points on all threads, and writes each in order while the next is computed.
struct Engine<'a> {
    sweep: &'a Sweep<'a>,
    progress: &'a Progress,
}

/// What is kept from one batch for the next: workers, and buffers that have been written.
#[derive(Default)]
struct Idle<'a> {
    workers: Mutex<Vec<Worker<'a>>>,
    buffers: Mutex<Vec<Vec<u8>>>,
}

fn pop<T>(kept: &Mutex<Vec<T>>) -> Option<T> {
    kept.lock().ok().and_then(|mut kept| kept.pop())
}

fn keep<T>(kept: &Mutex<Vec<T>>, one: T) {
    if let Ok(mut kept) = kept.lock() {
        kept.push(one);
    }
}

impl Engine<'_> {
    /// Batches grow until one takes about this long, so that little is lost by a stop and little spent on starting.
    const BATCH: Duration = Duration::from_millis(100);
    /// Pieces of a batch for each thread, so that one slow point does not hold up the others.
    const PIECES: u64 = 16;
    /// Keeps a batch's lines in a few megabytes.
    const MOST: u64 = 16_384;

    fn run(&self, points: Range<u64>, sink: &mut Sink) -> Result<Tally, Failure> {
        listen();
        let mut tally = Tally::default();
        let threads = rayon::current_num_threads() as u64;
        let mut size = threads;
        let mut from = points.start;
        let idle = Idle::default();
        let mut waiting = Vec::new();
        loop {
            let to = points.end.min(from + size);
            let started = Instant::now();
            let (written, next) = rayon::join(
                || self.write(std::mem::take(&mut waiting), sink, &mut tally, &idle),
                || (from < to).then(|| self.batch(from..to, threads * Self::PIECES, &idle)),
            );
            if written? == Taken::Closed {
                return Ok(tally);
            }
            waiting = match next {
                Some(Some(pieces)) => pieces,
                Some(None) => return Err(stopped(from, &points, sink)),
                None => return Ok(tally),
            };
            let took = started.elapsed();
            self.progress.advance(to - from);
            from = to;
            if took < Self::BATCH / 2 {
                size = (size * 2).min(Self::MOST.max(threads));
            } else if took > Self::BATCH * 2 {
                size = (size / 2).max(threads);
            }
        }
    }

    fn write(
        &self,
        pieces: Vec<Piece>,
        sink: &mut Sink,
        tally: &mut Tally,
        idle: &Idle<'_>,
    ) -> Result<Taken, Failure> {
        for Piece { mut bytes, tally: own } in pieces {
            if sink.write(&bytes)? == Taken::Closed {
                return Ok(Taken::Closed);
            }
            tally.add(own);
            bytes.clear();
            keep(&idle.buffers, bytes);
        }
        Ok(Taken::Yes)
    }

    fn batch<'w>(&'w self, points: Range<u64>, pieces: u64, idle: &Idle<'w>) -> Option<Vec<Piece>> {
        let count = points.end - points.start;
        let pieces = pieces.min(count);
        let border = |n: u64| points.start + count * n / pieces;
        let piece = |n: u64| {
            let mut worker = pop(&idle.workers).unwrap_or_else(|| self.sweep.worker());
            let buffer = pop(&idle.buffers).unwrap_or_default();
            let piece = worker.piece(border(n)..border(n + 1), buffer, &STOP);
            keep(&idle.workers, worker);
            piece
        };
        (0..pieces).into_par_iter().map(piece).collect()
    }
}

fn stopped(at: u64, points: &Range<u64>, sink: &Sink) -> Failure {
    let (done, all) = (at - points.start, points.end - points.start);
    let message = match sink {
        Sink::File(_) => {
            format!("stopped after {done} of {all} points; the same command with --resume goes on")
        }
        Sink::Pipe(_) => format!("stopped after {done} of {all} points"),
    };
    Failure { status: STOPPED, message }
}

/// `3/40`.
fn part(text: &str, points: u64) -> Result<Slice, Failure> {
    let bad =
        || Failure::usage(format!("--part {text}: write K/N, part K of N, with K from 1 to N, such as 3/40"));
    let (part, of) = text.split_once('/').ok_or_else(bad)?;
    let (part, of): (u64, u64) = (part.parse().map_err(|_| bad())?, of.parse().map_err(|_| bad())?);
    if part == 0 || part > of || of > MOST_PARTS {
        return Err(bad());
    }
    if of > points {
        return Err(Failure::usage(format!(
            "--part {text}: the sweep has {points} points; share it out among at most so many parts"
        )));
    }
    Ok(Slice { part, of })
}

impl Args {
    /// Opens the file or writes the header to the pipe; with the point to go on with. `None` where nothing is to be done.
    fn open(&self, target: Option<&Path>, contents: &Contents<'_>) -> Result<Option<(Sink, u64)>, Failure> {
        let Some(path) = target else {
            let mut sink = Sink::Pipe(io::stdout());
            let taken = sink.write(contents.header)?;
            return Ok((taken == Taken::Yes).then_some((sink, contents.points.start)));
        };
        let leftover = match (self.resume, self.restart) {
            (true, _) => Leftover::Resume,
            (_, true) => Leftover::Restart,
            _ => Leftover::Refuse,
        };
        let file = SweepFile::open(path, contents, leftover)?;
        Ok(file.map(|file| {
            let next = file.next;
            (Sink::File(file), next)
        }))
    }

    fn document(&self) -> Result<Document, Failure> {
        let mut document = self.experiment.document_of(self.file.as_deref())?;
        if let Some(report) = &self.report {
            document.set("--report", "sweep.report", report);
        }
        if !self.axis.is_empty() {
            let axes: Result<Vec<String>, Failure> = self.axis.iter().map(|text| axis(text)).collect();
            document.set_raw("--axis", "sweep.axes", &format!("[{}]", axes?.join(", ")));
        }
        let target = &self.target;
        for (option, key, value) in [
            ("--crossing", "sweep.target.crossing", &target.crossing),
            ("--half-angle", "sweep.target.half-angle", &target.half_angle),
            ("--separation", "sweep.target.separation", &target.separation),
        ] {
            if let Some(value) = value {
                document.set(option, key, value);
            }
        }
        for (option, key, given) in [
            ("--collinear", "sweep.target.collinear", target.collinear),
            ("--beamlike", "sweep.target.beamlike", target.beamlike),
            ("--touching", "sweep.target.touching", self.touching),
        ] {
            if given {
                document.set_raw(option, key, "true");
            }
        }
        if let Some(by) = self.by {
            document.set("--by", "sweep.by", by.name());
        }
        if let Some(find) = self.find {
            document.set("--find", "sweep.find", find.name());
        }
        if let Some(pair) = self.pair {
            document.set_raw("--pair", "sweep.pair", &pair.to_string());
        }
        if let Some(basis) = self.basis {
            document.set("--basis", "sweep.basis", basis.name());
        }
        if self.half_wave {
            document.set_raw("--half-wave", "sweep.half_wave", "true");
        }
        // axes may name files too
        attach_curves(&mut document, self.file.as_deref())?;
        Ok(document)
    }
}

/// `KEY=A..B/N`, `KEY=A..B/STEP` or `KEY=A,B,C` as an axis of a job.
fn axis(text: &str) -> Result<String, Failure> {
    let bad = |why: &str| {
        Failure::usage(format!(
            "--axis {text}: {why}; write KEY=FROM..TO/POINTS, KEY=FROM..TO/STEP or KEY=A,B,C, for example \
             crystal.tilt=-1deg..4deg/501"
        ))
    };
    let quoted = |text: &str| toml::Value::String(text.trim().into()).to_string();
    let (key, values) = text.split_once('=').ok_or_else(|| bad("there is no ="))?;
    let key = quoted(key);
    let Some((from, rest)) = values.split_once("..") else {
        let list: Vec<String> = values.split(',').map(quoted).collect();
        return Ok(format!("{{ key = {key}, values = [{}] }}", list.join(", ")));
    };
    let (to, spacing) = rest.rsplit_once('/').ok_or_else(|| bad("the range does not say how many points"))?;
    let spacing = match spacing.trim().parse::<u64>() {
        Ok(points) => format!("points = {points}"),
        Err(_) => format!("step = {}", quoted(spacing)),
    };
    Ok(format!("{{ key = {key}, from = {}, to = {}, {spacing} }}", quoted(from), quoted(to)))
}

impl OutputArgs {
    /// The file that rows of a sweep go to; `None` for standard output.
    fn sweep_target(&self) -> Result<Option<&PathBuf>, Failure> {
        if self.format.is_some_and(|form| form != Format::Csv) {
            return Err(Failure::usage("a sweep is written as csv; leave --format out"));
        }
        let Some(path) = self.output.as_ref().filter(|path| path.as_os_str() != "-") else { return Ok(None) };
        match self.form()? {
            Format::Csv => Ok(Some(path)),
            _ => Err(Failure::usage(format!(
                "{}: a sweep is written as csv; name a .csv file",
                path.display()
            ))),
        }
    }
}
