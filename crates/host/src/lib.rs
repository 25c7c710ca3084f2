//! finds, reads and loads plugin libraries
