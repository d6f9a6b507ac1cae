//! placeholder until merge
/// Density.
pub fn density(a: &crate::config::Air) -> f64 {
    a.pressure_hpa * 100.0 / (287.05 * (a.temperature_c + 273.15))
}
