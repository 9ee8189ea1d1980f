//! Least squares of readings as a polynomial of force, by QR in a scaled force.

use nalgebra::{DMatrix, DVector};

/// A fitted polynomial. Scaled coefficients belong to powers of force / `scale_n`.
#[derive(Debug, Clone)]
pub(super) struct Fit {
    pub scale_n: f64,
    pub scaled: DVector<f64>,
    /// (XᵀX)⁻¹ in the scaled force.
    pub inverse: DMatrix<f64>,
    /// Sum of squared residuals, reading units squared.
    pub rss: f64,
    /// Points less coefficients.
    pub dof: usize,
}

/// Fits `readings` over `forces_n`; `None` where there are fewer points or distinct forces than coefficients.
pub(super) fn fit(forces_n: &[f64], readings: &[f64], degree: usize) -> Option<Fit> {
    let count = forces_n.len();
    let terms = degree + 1;
    if count < terms || readings.len() != count {
        return None;
    }
    // powers of a number up to one: the normal matrix stays well conditioned and the covariance free of overflow
    let scale_n = forces_n.iter().fold(0.0f64, |largest, force| largest.max(force.abs()));
    if !(scale_n > 0.0 && scale_n.is_finite()) {
        return None;
    }
    let design = DMatrix::from_fn(count, terms, |row, power| (forces_n[row] / scale_n).powi(power as i32));
    let observed = DVector::from_column_slice(readings);
    let factors = design.clone().qr();
    let upper = factors.r();
    let least = (0..terms).map(|at| upper[(at, at)].abs()).fold(f64::INFINITY, f64::min);
    if least <= 1e-10 * upper[(0, 0)].abs() {
        return None;
    }
    let scaled = upper.solve_upper_triangular(&(factors.q().transpose() * &observed))?;
    let upper_inverse = upper.solve_upper_triangular(&DMatrix::identity(terms, terms))?;
    let residuals = &observed - &design * &scaled;
    Some(Fit {
        scale_n,
        inverse: &upper_inverse * upper_inverse.transpose(),
        rss: residuals.norm_squared(),
        scaled,
        dof: count - terms,
    })
}

impl Fit {
    /// Coefficients of powers of the force in newtons, lowest first.
    pub fn coefficients(&self) -> Vec<f64> {
        self.unscale(&self.scaled)
    }

    /// Scaled coefficients to those of the force in newtons.
    pub fn unscale(&self, scaled: &DVector<f64>) -> Vec<f64> {
        scaled.iter().enumerate().map(|(power, value)| value / self.scale_n.powi(power as i32)).collect()
    }

    /// Residual variance; `None` without degrees of freedom.
    pub fn residual_variance(&self) -> Option<f64> {
        (self.dof > 0).then(|| self.rss / self.dof as f64)
    }

    /// Covariance of the coefficients of the force in newtons for a given variance of the readings.
    pub fn covariance(&self, variance: f64) -> Vec<Vec<f64>> {
        unscale_matrix(&(&self.inverse * variance), self.scale_n)
    }
}

/// Covariance in the scaled force to that in newtons.
pub(super) fn unscale_matrix(matrix: &DMatrix<f64>, scale_n: f64) -> Vec<Vec<f64>> {
    (0..matrix.nrows())
        .map(|row| {
            (0..matrix.ncols()).map(|column| matrix[(row, column)] / scale_n.powi((row + column) as i32)).collect()
        })
        .collect()
}

/// Value of a polynomial, lowest power first.
pub(super) fn value(coefficients: &[f64], at: f64) -> f64 {
    coefficients.iter().rev().fold(0.0, |sum, coefficient| sum * at + coefficient)
}

/// Slope of a polynomial, lowest power first.
pub(super) fn slope(coefficients: &[f64], at: f64) -> f64 {
    coefficients
        .iter()
        .enumerate()
        .skip(1)
        .rev()
        .fold(0.0, |sum, (power, coefficient)| sum * at + power as f64 * coefficient)
}

/// Forces where the slope is nil, for degrees up to three, in rising order.
pub(super) fn turning_points(coefficients: &[f64]) -> Vec<f64> {
    let get = |power: usize| coefficients.get(power).copied().unwrap_or(0.0);
    // slope = c + b F + a F²
    let (c, b, a) = (get(1), 2.0 * get(2), 3.0 * get(3));
    let mut roots = if a == 0.0 {
        if b == 0.0 { Vec::new() } else { vec![-c / b] }
    } else {
        let discriminant = b * b - 4.0 * a * c;
        if discriminant <= 0.0 {
            Vec::new()
        } else {
            // the stable pair: no difference of near-equal numbers
            let q = -0.5 * (b + discriminant.sqrt().copysign(b));
            if q == 0.0 { Vec::new() } else { vec![q / a, c / q] }
        }
    };
    roots.retain(|root| root.is_finite());
    roots.sort_by(f64::total_cmp);
    roots
}

/// Whether the polynomial rises or falls throughout the interval.
pub(super) fn monotonic_within(coefficients: &[f64], low: f64, high: f64) -> bool {
    turning_points(coefficients).iter().all(|turn| *turn < low || *turn > high) && slope(coefficients, low) != 0.0
}
