//! What holds for every crystal: conservation laws, symmetries, limits and round trips, on random crystals.
//!
//! Crystals are random in indices, dispersion, cut and pose; half of them are from the catalogue. A case that finds
//! nothing to look at proves nothing, so every property counts the cases that did ([`every`]). Seeds are fixed.

mod conservation;
mod crossings;
mod crystals;
mod pairs;
mod rings;
mod round_trips;
mod slopes;
mod slowly;
mod symmetries;
mod waves;
