//! The program as a user runs it: exit status, standard output and standard error together. One module per command,
//! then what all commands share.

mod run;
mod table;

mod completions;
mod cones;
mod cut;
mod fit;
mod index;
mod job;
mod materials;
mod picture;
mod sheet;
mod state;
mod sweep;
mod tilt;
mod tolerance;
mod twin;

mod bad_input;
mod interrupted;
mod output;
mod robustness;
