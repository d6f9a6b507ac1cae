//! The one test binary: each module guards a promise that stands at its head.

mod screens;
mod simulate_van;
