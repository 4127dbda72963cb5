//! One thread's share of a sweep: points into lines.

use std::collections::BTreeMap;
use std::ops::Range;
use std::sync::atomic::{AtomicBool, Ordering};

use super::{Fault, Sweep, rows};
use crate::job::Setup;
use crate::job::axes::Value;
use crate::matching::Status;
use crate::optics::Indices;
use crate::report::{Lead, Lines};

/// Lines of neighbouring points.
#[derive(Debug, Default)]
pub struct Piece {
    /// CSV without header.
    pub bytes: Vec<u8>,
    /// What became of the points.
    pub tally: Tally,
}

/// How many points ended how.
#[derive(Debug, Clone, Default)]
pub struct Tally {
    /// Points by the first status of their rows that is not `ok`.
    pub points: BTreeMap<&'static str, u64>,
    /// The first point that has no answer, and why.
    pub first_fault: Option<(u64, String)>,
}

impl Tally {
    fn count(&mut self, status: Status) {
        *self.points.entry(status.name()).or_default() += 1;
    }

    fn fault(&mut self, point: u64, message: String) {
        self.first_fault.get_or_insert((point, message));
    }

    /// Adds the tally of later points.
    pub fn add(&mut self, later: Self) {
        for (status, count) in later.points {
            *self.points.entry(status).or_default() += count;
        }
        if let Some((point, message)) = later.first_fault {
            self.fault(point, message);
        }
    }
}

/// Setups that are kept ready, so that a sweep whose fastest axis is a list of words does not copy one for every point.
const READY: usize = 64;

/// What one thread needs.
pub struct Worker<'a> {
    sweep: &'a Sweep<'a>,
    lines: Lines,
    ready: Vec<(u64, Setup)>,
    indices: Indices,
}

impl<'a> Sweep<'a> {
    /// For one thread.
    #[must_use]
    pub fn worker(&'a self) -> Worker<'a> {
        Worker { sweep: self, lines: Lines::default(), ready: Vec::new(), indices: Indices::default() }
    }

    /// The header line.
    #[must_use]
    pub fn header(&self) -> Vec<u8> {
        let mut lines = Lines::default();
        lines.header(self.columns().iter().map(|c| c.name.as_str()));
        lines.take()
    }
}

impl Worker<'_> {
    /// The lines of some points, at the end of `buffer`; `None` where `stop` was set meanwhile.
    pub fn piece(&mut self, points: Range<u64>, buffer: Vec<u8>, stop: &AtomicBool) -> Option<Piece> {
        let mut tally = Tally::default();
        self.lines.go_on(buffer);
        for point in points {
            if stop.load(Ordering::Relaxed) {
                self.lines = Lines::default();
                return None;
            }
            self.point(point, &mut tally);
        }
        Some(Piece { bytes: self.lines.take(), tally })
    }

    fn point(&mut self, point: u64, tally: &mut Tally) {
        let values = self.sweep.grid().values(point);
        self.lines.lead(std::iter::once(Lead::Number(point as f64)).chain(values.map(|value| match value {
            Value::Number(number) => Lead::Number(number),
            Value::Word(word) => Lead::Text(word),
        })));
        if let Err(fault) = self.rows(point) {
            let axes = self.sweep.grid().axes().count();
            // the point, its axes and the last two columns are written anyway
            rows::write_blank(self.sweep.columns().len() - axes - 3, fault.status, &mut self.lines);
            tally.fault(point, fault.message);
        }
        tally.count(self.lines.status());
    }

    fn rows(&mut self, point: u64) -> Result<(), Fault> {
        let Sweep { plan, setups, .. } = self.sweep;
        let combination = setups.combination(plan, point);
        let at = match self.ready.iter().position(|(own, _)| *own == combination) {
            Some(at) => at,
            None => {
                let setup = setups.base(plan, combination)?;
                if self.ready.len() >= READY {
                    self.ready.clear();
                }
                self.ready.push((combination, setup));
                self.ready.len() - 1
            }
        };
        let setup = &mut self.ready[at].1;
        let mut search = plan.search;
        setups.set(plan, point, setup, &mut search)?;
        rows::write(plan.report, setup, &search, setups.catalogue(), &mut self.indices, &mut self.lines)
    }
}
