//! whole-program tests and checks against published values
