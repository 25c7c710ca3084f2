//! Parquet files: tables, blocks of series, and series assembled from blocks.

mod arrow;
pub(crate) mod assemble;
pub(crate) mod block;
mod cells;
mod format;
pub(crate) mod join;
pub(crate) mod rows;
pub(crate) mod table;
