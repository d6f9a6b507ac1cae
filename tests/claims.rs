//! The table of contents of all tests.

mod screens;
//! The one test binary: each module guards a promise that stands at its head.

mod simulate_van;
