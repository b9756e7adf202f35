//! The accounting identity of the balance of payments, its published forms, and intervals for them.
