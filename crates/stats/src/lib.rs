//! numerics on series and histograms
