//! What whole-program tests share: the built program and desks to run it at ([`program`]), plugin libraries to run it with ([`plugins`]), and repetitions that
//! tell whether errors are honest ([`calibration`]).
#![forbid(unsafe_code)]

pub mod calibration;
pub mod plugins;
pub mod program;
pub mod terminal;
