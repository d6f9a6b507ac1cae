//! The one test binary: each module guards a promise that stands at its head.

mod command_line;
mod live_ports;
mod same_bytes_same_session;
mod screens;
mod simulate_van;
mod torn_session_recovers;
