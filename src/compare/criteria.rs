//! Usual criteria of consistency, as lines to hold a group against.

use super::{Criterion, Group};

/// Largest coefficient of variation of total impulse that a certified motor's samples may show: read second-hand only and from memory
/// (attributed to NFPA 1125; the primary text was not seen).
const IMPULSE_VARIATION: f64 = 0.067;
/// Largest departure of one motor's average thrust from the mean, as a share and in newtons, whichever is larger: read second-hand only
/// (attributed to NFPA 1125, 8.1.7; edition not known).
const AVERAGE_SHARE: f64 = 0.2;
const AVERAGE_N: f64 = 1.0;

pub fn criteria(group: &Group) -> Vec<Criterion> {
    let mut found = Vec::new();
    if let Some(value) = group.quantities.get("total_impulse").and_then(|s| s.coefficient_of_variation) {
        found.push(Criterion {
            pour: group.pour.clone(),
            name: "standard deviation of total impulse, share of the mean".into(),
            value,
            limit: IMPULSE_VARIATION,
            met: value <= IMPULSE_VARIATION,
            source: "second-hand and from memory, attributed to NFPA 1125; primary text not seen".into(),
        });
    }
    if let Some(spread) = group.quantities.get("average_thrust").filter(|s| s.n > 1) {
        let value = spread.values.values().map(|v| (v - spread.mean).abs()).fold(0.0, f64::max);
        let limit = (AVERAGE_SHARE * spread.mean).max(AVERAGE_N);
        found.push(Criterion {
            pour: group.pour.clone(),
            name: "largest departure of average thrust from the mean, N".into(),
            value,
            limit,
            met: value <= limit,
            source: "second-hand, attributed to NFPA 1125 8.1.7 (20 % or 1 N); edition not known".into(),
        });
    }
    found
}
