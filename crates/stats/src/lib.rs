//! Numerics on series and histograms.
//!
//! Plain functions on slices: they know nothing of pipelines, plugins or files. Routines that may fail come as a
//! family: `FooParams` in, `FooInfo` or a result out, `FooError` with what was reached.
//!
//! - [`autocorrelation`]: integrated autocorrelation times and errors of means, over several chains
//! - [`derived`]: functions of means with errors that know about autocorrelation
//! - [`jackknife`]: functions of means from blocks, with covariances
//! - [`rhat`], [`equilibration`], [`discard`]: whether chains have forgotten where they began
//! - [`fit`], [`local`]: least squares with covariance, nonlinear least squares, local polynomials
//! - [`reweight`]: curves over temperature from multiple histograms
//! - [`crossing`]: where curves of several sizes cross, and where that tends
//!
//! ```
//! use spinledger_stats::autocorrelation::{AutocorrelationParams, autocorrelation};
//!
//! let chain: Vec<f64> = (0..1000).map(|t| f64::from(t % 7)).collect();
//! let found = autocorrelation(&[&chain], &AutocorrelationParams::default())?;
//! assert!((found.mean - 2.997).abs() < 1e-12);
//! # Ok::<(), spinledger_stats::autocorrelation::AutocorrelationError>(())
//! ```
//!
//! Results have the same bits on every machine: sums run in a fixed order and elementary functions come from
//! `spinledger-numerics`. Nothing here is parallel. Which quantities a run reports, and which words flag
//! a doubtful one, is left to the caller.

#![forbid(unsafe_code)]

pub mod autocorrelation;
pub mod crossing;
pub mod derived;
pub mod discard;
pub mod equilibration;
pub mod fit;
pub mod jackknife;
pub mod local;
pub mod matrix;
pub mod reweight;
pub mod rhat;

mod autocovariance;
mod fourier;
