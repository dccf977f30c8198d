//! Counts of steps.
/// Numbers.
#[derive(Clone, Debug, PartialEq)]
pub struct Fixed;
impl Fixed {
    /// c
    pub fn coefficients(&self) -> serde_json::Value {
        serde_json::Value::Null
    }
    /// r
    pub fn roots(&self) -> bool {
        false
    }
}
