//! placeholder until merge
pub mod air;
