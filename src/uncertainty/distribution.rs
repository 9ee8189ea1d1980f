//! What may be said of an input: the shape of its distribution (JCGM 101:2008 6.4), scaled to one standard uncertainty.

use rand::{Rng, RngExt};
use rand_distr::{Distribution, StandardNormal, StudentT};

/// Shape of an input's distribution about nil.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub enum Shape {
    /// Many small causes, or a stated standard uncertainty.
    #[default]
    Normal,
    /// Stated limits and nothing else (JCGM 101:2008 6.4.2).
    Rectangular,
    /// Sum of two errors with the same limits (JCGM 101:2008 6.4.4).
    Triangular,
    /// Swings between limits (JCGM 101:2008 6.4.6).
    ArcSine,
    /// Mean of a few readings with these degrees of freedom; one unit is the standard error (JCGM 101:2008 6.4.9), so that the
    /// variance is ν/(ν − 2) of it.
    StudentT(f64),
}

impl Shape {
    /// From the degrees of freedom of an estimate; normal where they are many or not known.
    pub fn of_estimate(degrees_of_freedom: f64) -> Self {
        const MANY: f64 = 200.0;
        if (1.0..MANY).contains(&degrees_of_freedom) { Shape::StudentT(degrees_of_freedom) } else { Shape::Normal }
    }

    /// Degrees of freedom of the standard uncertainty; infinite where it is taken as known.
    pub fn degrees_of_freedom(self) -> f64 {
        match self {
            Shape::StudentT(dof) => dof,
            _ => f64::INFINITY,
        }
    }

    /// One draw, in standard uncertainties (standard errors for Student's t).
    pub fn draw(self, rng: &mut impl Rng) -> f64 {
        match self {
            Shape::Normal => StandardNormal.sample(rng),
            Shape::Rectangular => 3f64.sqrt() * rng.random_range(-1.0..1.0),
            Shape::Triangular => 1.5f64.sqrt() * (rng.random_range(-1.0..1.0) + rng.random_range(-1.0..1.0)),
            Shape::ArcSine => 2f64.sqrt() * rng.random_range(0.0..std::f64::consts::TAU).sin(),
            Shape::StudentT(dof) => match StudentT::new(dof) {
                Ok(t) => t.sample(rng),
                Err(_) => StandardNormal.sample(rng),
            },
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use rand::SeedableRng;

    #[test]
    fn every_shape_has_the_spread_it_says() {
        let mut rng = rand_chacha::ChaCha8Rng::seed_from_u64(4);
        let n = 200_000;
        // Largest value that the shape can take, by its limits.
        for (shape, variance, most) in [
            (Shape::Normal, 1.0, 9.0),
            (Shape::Rectangular, 1.0, 3f64.sqrt()),
            (Shape::Triangular, 1.0, 6f64.sqrt()),
            (Shape::ArcSine, 1.0, 2f64.sqrt()),
            (Shape::StudentT(10.0), 10.0 / 8.0, 40.0),
        ] {
            let draws: Vec<f64> = (0..n).map(|_| shape.draw(&mut rng)).collect();
            let mean = draws.iter().sum::<f64>() / f64::from(n);
            let found = draws.iter().map(|d| (d - mean).powi(2)).sum::<f64>() / f64::from(n);
            // A variance of 200,000 draws is good to 0.5 % (t with ten degrees of freedom: 0.8 %), a mean to 0.0025.
            assert!((found / variance - 1.0).abs() < 0.03 && mean.abs() < 0.012, "{shape:?} {found} {mean}");
            let largest = draws.iter().fold(0.0_f64, |m, d| m.max(d.abs()));
            assert!(largest <= most, "{shape:?} {largest}");
        }
    }
}
