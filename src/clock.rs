//! The one clock.
