//! placeholder until merge
pub mod air;
/// x
#[derive(Default)]
pub struct Options {
    /// x
    pub at_kmh: Option<f64>,
    /// x
    pub baseline: Option<String>,
}
/// x
pub struct Reduction;
/// x
#[derive(Debug, thiserror::Error)]
pub enum ReductionError {
    /// x
    #[error("x")]
    X,
}
/// x
pub fn reduce(_: &[crate::session::Session], _: &Options) -> Result<Reduction, ReductionError> {
    Ok(Reduction)
}
