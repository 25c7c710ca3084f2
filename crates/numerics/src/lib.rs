//! random streams, elementary functions and ordered sums
