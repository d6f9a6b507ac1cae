//! The one test binary: each module guards a promise that stands at its head.

mod reduction_coverage;
mod reduction_inference;
mod reduction_outings;
mod reduction_plumbing;
mod reduction_poor_inputs;
mod screens;
mod simulate_van;
