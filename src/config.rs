//! Settings, read from flags and environment in one place and passed down.
