//! A sweep shared out: which points belong to which part, and how its file is called.

use std::path::{Path, PathBuf};

/// Which part of how many, from 1.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Slice {
    /// This one, from 1.
    pub part: u64,
    /// Of so many.
    pub of: u64,
}

impl Slice {
    /// The whole sweep.
    pub const WHOLE: Self = Self { part: 1, of: 1 };

    /// Points of this part, of `count` in all: parts are contiguous and differ by at most one point.
    #[must_use]
    pub fn points(self, count: u64) -> std::ops::Range<u64> {
        let border = |n: u64| (u128::from(count) * u128::from(n) / u128::from(self.of)) as u64;
        border(self.part - 1)..border(self.part)
    }

    /// Name of the file that holds this part of `rows`: `rows.csv` itself, or `rows.003-of-040.csv`.
    #[must_use]
    pub fn file(self, rows: &Path) -> PathBuf {
        if self.of == 1 {
            return rows.into();
        }
        let width = self.of.to_string().len().max(3);
        rows.with_extension(format!("{:0width$}-of-{:0width$}.csv", self.part, self.of))
    }
}
