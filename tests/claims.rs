//! The table of contents of all tests.

mod screens;
mod simulate_van;
