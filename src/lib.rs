//! steadytap: decide on the road, with honest uncertainty, whether a body change moved the air
//! pressures on a vehicle, by how much, and what it means.
//!
//! ```text
//!  serial ports ─┐                                            keys ─┐
//!  record file ──┼─ bytes ─ stream ─ frames ─ signal ─ samples ─ hold ─ dwells ─ pipeline ─ entries
//!  simulate ─────┘          (lines)           (units, lag)       (window)            │        │
//!                                                                        screen, sound      session file
//!                                                                                             │
//!                                                    report ─ tables ─ reduction ─ passes ────┘
//! ```
//!
//! Each file knows its room: a layer imports only lower ones, observers are imported by the shell alone.
//!
//! | layer | room | turns | into |
//! | --- | --- | --- | --- |
//! | 0 | [`units`] | text, trade units | stream time, SI and km/h |
//! | 0 | [`pneumatics`] | a tube and a volume | delay, bandwidth, settling |
//! | 0 | [`text`] | foreign strings | strings that are safe to show |
//! | 1 | [`config`] | rig, car and outing files | a checked [`config::Setup`] |
//! | 2 | [`session`] | entries, plain data | checksummed lines, and back, damage told |
//! | 3 | [`stream`] | bytes, record lines | frames, rejected lines, commands |
//! | 4 | [`signal`] | frames | scaled, lag-shifted samples; what the eye sees |
//! | 5 | [`hold`] | samples | off, settling, steady, held; full dwells |
//! | 6 | [`reduction`] | sessions | coefficients, comparisons, verdicts |
//! | 7 | [`report`] | a reduction | text, CSV, JSON, HTML |
//! | 8 | [`pipeline`] | inputs, one at a time | events and session entries: live, replay, re-hold |
//! | 9 | [`screen`] | a pipeline | a drawn frame (observer) |
//! | 9 | [`sound`] | an event, the speed | a cue, its samples, the guidance tone (observer) |
//! | 9 | [`simulate`] | a seed | the bytes the ports of an invented van would send |
//! | 10 | [`shell`] | the world: ports, files, clock, terminal, sound | inputs for the pipeline; the only I/O |
//! | 11 | [`cli`] | words | a command and its exit status |
//!
//! Nothing below the shell reads a clock, a file, an environment variable or a random source: the same
//! bytes give the same session.
#![forbid(unsafe_code)]
#![warn(missing_docs)]

pub mod cli;
pub mod config;
pub mod hold;
pub mod pipeline;
pub mod pneumatics;
pub mod reduction;
pub mod report;
pub mod screen;
pub mod session;
pub mod shell;
pub mod signal;
pub mod simulate;
pub mod sound;
pub mod stream;
pub mod text;
pub mod units;
