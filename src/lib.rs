//! Which crystal to order, how to tilt it and where the photon pairs go.
//!
//! `twincone` computes spontaneous parametric down-conversion in birefringent crystals from wave optics: exact
//! dispersion surfaces of uniaxial and biaxial crystals, exact refraction at tilted plane faces, no small-angle formula.
//!
//! Data flows one way: what was typed ([`job::description`]) becomes a validated setup in SI ([`job::setup`]), the
//! physics ([`optics`], [`matching`]) works on that, and [`report`] turns results into rows and rows into text, CSV or
//! JSON. The library never prints, exits or reads the environment; the commands, in the program's `cli`, never compute.
//!
//! | module | subject |
//! |---|---|
//! | [`quantity`] | `"405 nm"` to SI and back |
//! | [`frame`] | lab, mount and dielectric frames |
//! | [`material`] | dispersion, nonlinear tensors, the catalogue, user files |
//! | [`optics`] | waves at a tangential wave vector |
//! | [`matching`] | phase matching: cuts, rings, crossings, turns |
//! | [`job`] | the description of an experiment |
//! | [`report`] | rows to text, CSV, JSON |

pub mod frame;
pub mod job;
pub mod matching;
pub mod material;
pub mod optics;
pub(crate) mod places;
pub mod quantity;
pub mod report;
