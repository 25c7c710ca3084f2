//! What whole-program tests share: the built program and desks to run it at ([`program`]), and plugin libraries to run it with ([`plugins`]).
#![forbid(unsafe_code)]

pub mod plugins;
pub mod program;
