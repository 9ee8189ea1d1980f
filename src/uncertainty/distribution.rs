//! Shapes of what is known of an input, each in units of its standard uncertainty, and draws from them.

use rand::{Rng, RngExt};
use rand_distr::{ChiSquared, Distribution, StandardNormal};

/// Shape of an input's distribution (JCGM 101:2008 6.4), standardised: one unit is one standard uncertainty.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub enum Shape {
    /// Many small causes, or one standard uncertainty stated and nothing more (6.4.7).
    #[default]
    Normal,
    /// Limits stated and nothing more (6.4.2): half-width √3.
    Rectangular,
    /// The sum of two rectangular errors of equal limits (6.4.5): half-width √6.
    Triangular,
    /// A swing met at an unknown phase (6.4.6): half-width √2.
    ArcSine,
    /// A mean or a fitted coefficient whose scatter was itself estimated with so many degrees of freedom (6.4.9). One unit is
    /// the standard error; the standard deviation is larger, √(ν/(ν − 2)), and infinite up to ν = 2.
    StudentT(f64),
}

/// Degrees of freedom from which on Student's t is as good as normal.
const MANY: f64 = 200.0;

impl Shape {
    /// Of an estimate with these degrees of freedom; normal where they are many or not known.
    pub fn of_estimate(degrees_of_freedom: f64) -> Self {
        if (1.0..MANY).contains(&degrees_of_freedom) { Shape::StudentT(degrees_of_freedom) } else { Shape::Normal }
    }

    /// Of a stated value: rectangular where limits were stated, normal where a standard uncertainty was.
    pub fn of_stated(limits: Option<f64>) -> Self {
        if limits.is_some() { Shape::Rectangular } else { Shape::Normal }
    }

    /// A draw, in standard uncertainties.
    pub fn draw(self, random: &mut impl Rng) -> f64 {
        match self {
            Shape::Normal => normal(random),
            Shape::Rectangular => 3f64.sqrt() * (2.0 * random.random::<f64>() - 1.0),
            Shape::Triangular => 6f64.sqrt() * (random.random::<f64>() + random.random::<f64>() - 1.0),
            Shape::ArcSine => 2f64.sqrt() * (2.0 * std::f64::consts::PI * random.random::<f64>()).sin(),
            Shape::StudentT(degrees_of_freedom) => normal(random) * scatter(degrees_of_freedom, random),
        }
    }

    /// Degrees of freedom of the standard uncertainty; infinite where it was not estimated from scatter.
    pub fn degrees_of_freedom(self) -> f64 {
        match self {
            Shape::StudentT(degrees_of_freedom) => degrees_of_freedom,
            _ => f64::INFINITY,
        }
    }
}

/// A draw from the normal distribution.
pub fn normal(random: &mut impl Rng) -> f64 {
    StandardNormal.sample(random)
}

/// What the true scatter may be against the estimated one: √(ν/χ²(ν)). Normal draws times this are Student's t; several
/// normal draws times one of these are the multivariate t of errors judged by one and the same scatter. Degrees of freedom that
/// are not positive numbers count as infinite.
pub fn scatter(degrees_of_freedom: f64, random: &mut impl Rng) -> f64 {
    match ChiSquared::new(degrees_of_freedom) {
        Ok(chi_squared) if degrees_of_freedom.is_finite() => (degrees_of_freedom / chi_squared.sample(random)).sqrt(),
        _ => 1.0,
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::uncertainty::statistics::t_quantile;
    use rand::SeedableRng;

    const DRAWS: usize = 200_000;

    fn sorted(shape: Shape) -> Vec<f64> {
        let mut random = rand_chacha::ChaCha8Rng::seed_from_u64(11);
        let mut draws: Vec<f64> = (0..DRAWS).map(|_| shape.draw(&mut random)).collect();
        draws.sort_by(f64::total_cmp);
        draws
    }

    fn sd(draws: &[f64]) -> f64 {
        (draws.iter().map(|x| x * x).sum::<f64>() / draws.len() as f64).sqrt()
    }

    /// Limits by the variance of each shape (JCGM 101:2008 6.4): a²/3, a²/6, a²/2.
    #[test]
    fn bounded_shapes_have_their_limits_and_unit_variance() {
        for (shape, limit) in
            [(Shape::Rectangular, 3f64.sqrt()), (Shape::Triangular, 6f64.sqrt()), (Shape::ArcSine, 2f64.sqrt())]
        {
            let draws = sorted(shape);
            assert!(draws[0] >= -limit && draws[DRAWS - 1] <= limit, "{shape:?}");
            assert!(draws[DRAWS - 1] > 0.99 * limit, "{shape:?}");
            // The variance's own standard error is at most √(κ − 1)/√n, below 1.5/√n for these shapes.
            assert!((sd(&draws).powi(2) - 1.0).abs() < 4.0 * 1.5 / (DRAWS as f64).sqrt(), "{shape:?}");
        }
    }

    /// Quartiles tell the shapes apart where variances do not: ±0.6745, ±√3/2, ±√6(1 − 1/√2), ±1.
    #[test]
    fn quartiles() {
        for (shape, quartile) in [
            (Shape::Normal, 0.674_49),
            (Shape::Rectangular, 3f64.sqrt() / 2.0),
            (Shape::Triangular, 6f64.sqrt() * (1.0 - 0.5f64.sqrt())),
            (Shape::ArcSine, 1.0),
            (Shape::StudentT(3.0), t_quantile(0.75, 3.0).unwrap()),
            (Shape::StudentT(f64::INFINITY), 0.674_49),
        ] {
            let draws = sorted(shape);
            // A quartile's standard error is √(3/16n)/density, and no density at a quartile here is below 0.22.
            let tolerance = 4.0 * (3.0 / 16.0 / DRAWS as f64).sqrt() / 0.22;
            assert!((draws[DRAWS / 4] + quartile).abs() < tolerance, "{shape:?} {}", draws[DRAWS / 4]);
            assert!((draws[3 * DRAWS / 4] - quartile).abs() < tolerance, "{shape:?}");
        }
    }

    /// Variance of Student's t: ν/(ν − 2).
    #[test]
    fn a_fitted_value_varies_more_than_its_standard_error() {
        assert!((sd(&sorted(Shape::StudentT(10.0))) - 1.25f64.sqrt()).abs() < 0.02);
        assert_eq!(Shape::StudentT(10.0).degrees_of_freedom(), 10.0);
        assert_eq!(Shape::Rectangular.degrees_of_freedom(), f64::INFINITY);
    }

    #[test]
    fn what_is_known_gives_the_shape() {
        assert_eq!(Shape::of_estimate(12.0), Shape::StudentT(12.0));
        assert_eq!(Shape::of_estimate(5000.0), Shape::Normal);
        assert_eq!(Shape::of_estimate(f64::NAN), Shape::Normal);
        assert_eq!((Shape::of_stated(Some(0.1)), Shape::of_stated(None)), (Shape::Rectangular, Shape::Normal));
    }
}
