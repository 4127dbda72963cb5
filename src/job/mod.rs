//! The description of an experiment: what was typed, kept with its places, becomes a validated [`Setup`] in SI.

mod arms;
pub mod axes;
mod checks;
mod curve_file;
pub mod description;
mod document;
mod handle;
pub mod keys;
mod limits;
pub mod plan;
mod question;
mod resolve;
mod schema;
mod settle;
pub mod setup;
mod template;

pub use document::{Document, JobError};
pub use handle::Handle;
pub use plan::Plan;
pub use resolve::{resolve, resolve_description, target_angle};
pub use schema::schema;
pub use setup::Setup;
pub use template::template;
