//! entries, records, claims, journals and Parquet tables
