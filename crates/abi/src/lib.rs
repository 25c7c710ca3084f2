//! C-compatible types and the version of the plugin interface
