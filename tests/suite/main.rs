//! The integration tests, in reading order.
