//! Which crystal to order, how to tilt it and where the photon pairs go.
//!
//! `twincone` computes spontaneous parametric down-conversion in birefringent crystals from wave optics: exact
//! dispersion surfaces of uniaxial and biaxial crystals, exact refraction at tilted plane faces, no small-angle formula.
//!
//! From input to output there is one direction: a description with its places ([`job::description`]) is resolved to SI
//! ([`job::setup`]), [`optics`] and [`matching`] answer, [`report`] lays the answer out as rows and writes those as text,
//! CSV or JSON. Nothing in here touches a terminal, the process or its environment; that is left to the program, whose
//! commands in turn contain no physics.
//!
//! | module | subject |
//! |---|---|
//! | [`quantity`] | `"405 nm"` to SI and back |
//! | [`frame`] | lab, mount and dielectric frames |
//! | [`material`] | dispersion, nonlinear tensors, the catalogue, user files |
//! | [`optics`] | waves at a tangential wave vector |
//! | [`matching`] | phase matching: cuts, rings, crossings, turns |
//! | [`pairs`] | amplitudes, the entangled state, compensation |
//! | [`fit`] | the real bench, read out of what was measured |
//! | [`job`] | the description of an experiment |
//! | [`picture`] | what a screen or camera shows |
//! | [`report`] | rows to text, CSV, JSON |
//! | [`sweep`] | a report at every point of a grid of settings |
//! | [`tolerance`] | what errors cost, and whether turning repairs it |

pub(crate) mod columns;
pub mod fit;
pub mod frame;
pub mod job;
pub mod matching;
pub mod material;
pub(crate) mod number;
pub mod optics;
pub mod pairs;
pub mod picture;
pub(crate) mod places;
pub mod quantity;
pub mod report;
pub mod sweep;
pub mod tolerance;
