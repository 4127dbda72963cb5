//! What a bench really is, read out of rings and crossings that were measured on it.
//!
//! Least squares on the exact geometry: every prediction is a traced ring or a solved crossing of the crystal as the
//! unknowns say it stands. Priors from stated tolerances are further residuals, so that an unknown the data say nothing
//! about keeps its prior and its prior's uncertainty instead of running away.

mod again;
mod check;
mod diagnose;
mod find;
mod frame;
mod least_squares;
mod measured;
mod model;
mod read;
mod solve;
mod unknown;

pub use again::{Known, kept, other_datasets, other_views, setting_for};
pub use diagnose::{Doubt, doubts};
pub use find::{Exposure, Found, fit_frames};
pub use frame::{Frame, Outline};
pub use least_squares::{Minimum, Residuals, minimise};
pub use measured::{Label, Measurement, Seen, Settings, View};
pub use model::{Model, Traced};
pub use read::{FileError, TEMPLATE, read};
pub use solve::{FitError, Fitted, Question, Residual, fit};
pub use unknown::{Unknown, unknowns};
