//! The one test binary: each module guards a promise that stands at its head.

#![expect(
    clippy::disallowed_methods,
    clippy::disallowed_macros,
    reason = "tests wait for ports and show their figures"
)]

mod bad_configs;
mod command_line;
mod crash_model;
mod disk_trouble;
mod finish;
mod holds;
mod hostile_input;
mod layers;
mod lines;
mod live_ports;
mod outside;
mod pictures;
mod reduction_coverage;
mod reduction_inference;
mod reduction_meaning;
mod reduction_outings;
mod reduction_plumbing;
mod reduction_poor_inputs;
mod reduction_probe;
mod report_html;
mod same_bytes_same_session;
mod samples_and_readme;
mod screens;
mod simulate_van;
mod solo;
mod sound;
mod starting_points;
mod statistics;
mod terminal_trouble;
mod torn_session_recovers;
mod units;
mod workshop;
