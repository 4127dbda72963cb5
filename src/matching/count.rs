//! How often mismatches are worked out: what benchmarks report beside times. Costs nothing without the feature `count`.

#[cfg(feature = "count")]
thread_local! {
    static EVALUATIONS: std::cell::Cell<u64> = const { std::cell::Cell::new(0) };
}

/// Mismatches that this thread has worked out so far.
#[cfg(feature = "count")]
#[must_use]
pub fn evaluations() -> u64 {
    EVALUATIONS.get()
}

/// Counts some more.
#[inline(always)]
pub(super) fn add(_evaluations: usize) {
    #[cfg(feature = "count")]
    EVALUATIONS.set(EVALUATIONS.get() + _evaluations as u64);
}
