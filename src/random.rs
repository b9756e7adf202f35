//! Counter-based random draws, keyed by seed and stream, the same whatever the number of threads.
