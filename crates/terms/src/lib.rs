//! canonical values, parameter specifications, keys and located problems
