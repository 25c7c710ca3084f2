//! what a plugin author writes against
