//! The description of an experiment: what was typed, kept with its places, becomes a validated [`Setup`] in SI.

pub mod description;
mod document;
mod places;
pub mod setup;
mod template;

pub use document::{Document, JobError};
pub use setup::{Setup, resolve};
pub use template::template;

pub(crate) use places::point_at;
