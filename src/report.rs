//! placeholder until merge
/// x
pub fn text(_: &crate::reduction::Reduction, _: &crate::config::Show) -> String {
    String::from("(reduction follows)\n")
}
/// x
pub fn csv(_: &crate::reduction::Reduction) -> Vec<u8> {
    Vec::new()
}
/// x
pub fn json(_: &crate::reduction::Reduction) -> String {
    String::new()
}
