//! The description of an experiment: what was typed, kept with its places, becomes a validated [`Setup`] in SI.

mod arms;
mod checks;
pub mod description;
mod document;
mod resolve;
mod settle;
pub mod setup;
mod template;

pub use document::{Document, JobError};
pub use resolve::{resolve, resolve_description, target_angle};
pub use settle::choose_phi;
pub use setup::Setup;
pub use template::template;
