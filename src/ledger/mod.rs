//! Same or distinct: the minima met so far.
//!
//! Enters: ends of descents, with who met them and when. Leaves: entries, near twins. Promised: the order of insertion
//! never changes the contents. Deliberately absent: how minima are found.
