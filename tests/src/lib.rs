//! What whole-program tests share: the built program and desks to run it at ([`program`]).
#![forbid(unsafe_code)]

pub mod program;
