//! The middle value, which a few wild ones do not move.

/// The upper of the middle values; 0 for none.
pub fn median(mut values: Vec<f64>) -> f64 {
    if values.is_empty() {
        return 0.0;
    }
    let middle = values.len() / 2;
    *values.select_nth_unstable_by(middle, f64::total_cmp).1
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn wild_values_do_not_move_it() {
        assert_eq!(median(vec![3.0, 1.0, 2.0, 1e9, -1e9]), 2.0);
        assert_eq!(median(vec![1.0, 2.0]), 2.0);
        assert_eq!(median(Vec::new()), 0.0);
    }
}
