//! The one test binary: each module guards a promise that stands at its head.

mod bad_configs;
mod holds;
mod layers;
mod outside;
mod reduction_coverage;
mod reduction_inference;
mod reduction_outings;
mod reduction_plumbing;
mod samples_and_readme;
mod screens;
mod simulate_van;
mod torn_session;
