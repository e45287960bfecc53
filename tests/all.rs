//! The integration tests: one binary, so that linking stays short.
#![allow(missing_docs, reason = "tests explain themselves by their names")]
#![allow(clippy::unwrap_used, clippy::expect_used, reason = "a test may panic")]
#![allow(
    clippy::print_stderr,
    reason = "a skipped check says so where people look"
)]

mod captures;
mod changes;
mod commands;
mod edits;
mod family;
mod optimum;
mod outside;
mod panels;
mod plans;
mod reading;
mod repeats;
mod safety;
mod samples;
mod terminal;
mod tools;
mod why;
