//! The integration tests: one binary, so that linking stays short.
#![allow(missing_docs, reason = "tests explain themselves by their names")]
#![allow(clippy::unwrap_used, clippy::expect_used, reason = "a test may panic")]
