//! Centre of pressure by Barrowman's equations, and the centroid of the side outline beside it.

use super::vehicle::{Fins, Nose, NoseShape, Shape, Transition};

/// A part's normal-force slope (referred to the area of the reference diameter) and where it acts, m from the nose tip.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Part {
    pub slope: f64,
    pub station_m: f64,
}

/// # Formula
/// C_Nα = 2 (d/d_ref)²; station: cone 2/3, tangent ogive 0.466, paraboloid 1/2, ellipsoid 1/3 of its length (J. S. and J. A. Barrowman, The
/// Theoretical Prediction of the Center of Pressure, 1966; J. S. Barrowman, M.S. thesis, 1967)
pub fn nose(n: &Nose, reference_m: f64) -> Part {
    let share = match n.shape {
        NoseShape::Cone => 2.0 / 3.0,
        NoseShape::Ogive => 0.466,
        NoseShape::Paraboloid => 0.5,
        NoseShape::Ellipsoid => 1.0 / 3.0,
    };
    Part { slope: 2.0 * (n.diameter_m / reference_m).powi(2), station_m: share * n.length_m }
}

/// # Formula
/// C_Nα = 2 ((d_r/d_ref)² − (d_f/d_ref)²); X = X_p + L/3 (1 + (1 − d_f/d_r)/(1 − (d_f/d_r)²)) (Barrowman 1967; from memory)
pub fn transition(t: &Transition, reference_m: f64) -> Part {
    let ratio = t.diameter_ahead_m / t.diameter_behind_m;
    // (1 − q)/(1 − q²) = 1/(1 + q), also where the two are one.
    Part {
        slope: 2.0 * ((t.diameter_behind_m / reference_m).powi(2) - (t.diameter_ahead_m / reference_m).powi(2)),
        station_m: t.station_m + t.length_m / 3.0 * (1.0 + 1.0 / (1.0 + ratio)),
    }
}

/// # Formula
/// C_Nα = (1 + R/(S + R)) 4 N (S/d)²/(1 + √(1 + (2 l/(c_r + c_t))²)), l the length of the mid-chord line; X = X_b + x_s/3 (c_r + 2 c_t)/(c_r + c_t) +
/// (c_r + c_t − c_r c_t/(c_r + c_t))/6 (Barrowman 1967; from memory). Three or four fins.
pub fn fins(f: &Fins, reference_m: f64) -> Part {
    let (s, cr, ct, r) = (f.exposed_semispan_m, f.root_chord_m, f.tip_chord_m, 0.5 * f.body_diameter_m);
    let middle = s.hypot(f.sweep_distance_m + 0.5 * (ct - cr));
    let sum = cr + ct;
    let slope = (1.0 + r / (s + r)) * 4.0 * f.count as f64 * (s / reference_m).powi(2)
        / (1.0 + (1.0 + (2.0 * middle / sum).powi(2)).sqrt());
    let station_m = f.station_m + f.sweep_distance_m / 3.0 * (cr + 2.0 * ct) / sum + (sum - cr * ct / sum) / 6.0;
    Part { slope, station_m }
}

/// Centre of pressure of the whole, m from the nose tip; `None` where the parts hold each other up.
pub fn barrowman(shape: &Shape, reference_m: f64) -> Option<f64> {
    let mut parts = vec![nose(&shape.nose, reference_m)];
    parts.extend(shape.transitions.iter().map(|t| transition(t, reference_m)));
    parts.extend(shape.fins.iter().map(|f| fins(f, reference_m)));
    let slope: f64 = parts.iter().map(|p| p.slope).sum();
    (slope > 0.0).then(|| parts.iter().map(|p| p.slope * p.station_m).sum::<f64>() / slope)
}

/// Radius of the nose at a share of its length, as a share of its base radius.
pub fn nose_radius(n: &Nose, share: f64) -> f64 {
    let x = share.clamp(0.0, 1.0);
    match n.shape {
        NoseShape::Cone => x,
        NoseShape::Paraboloid => x.sqrt(),
        NoseShape::Ellipsoid => (1.0 - (1.0 - x).powi(2)).max(0.0).sqrt(),
        NoseShape::Ogive => {
            // Arc of radius ρ that meets the body without a kink.
            let (l, r) = (n.length_m, 0.5 * n.diameter_m);
            let rho = (l * l + r * r) / (2.0 * r);
            ((rho * rho - (l * (1.0 - x)).powi(2)).max(0.0).sqrt() + r - rho) / r
        }
    }
}

/// Half outline of the body: stations and radii, m, from the nose tip to the aft end.
pub fn outline(shape: &Shape, length_m: f64) -> Vec<[f64; 2]> {
    const NOSE_POINTS: usize = 200;
    let n = &shape.nose;
    let mut points: Vec<[f64; 2]> = (0..=NOSE_POINTS)
        .map(|k| {
            let share = k as f64 / NOSE_POINTS as f64;
            [share * n.length_m, 0.5 * n.diameter_m * nose_radius(n, share)]
        })
        .collect();
    let mut ordered = shape.transitions.clone();
    ordered.sort_by(|a, b| a.station_m.total_cmp(&b.station_m));
    for t in ordered {
        points.push([t.station_m, 0.5 * t.diameter_ahead_m]);
        points.push([t.station_m + t.length_m, 0.5 * t.diameter_behind_m]);
    }
    let radius = points.last().map_or(0.0, |p| p[1]);
    points.push([length_m, radius]);
    points
}

/// Centroid of the side outline, body and two fins of each set, m from the nose tip: the cut-out method, a conservative centre of pressure.
pub fn side_centroid(shape: &Shape, length_m: f64) -> Option<f64> {
    let (mut area, mut moment) = (0.0, 0.0);
    let mut add = |a: f64, x: f64| {
        area += a;
        moment += a * x;
    };
    for pair in outline(shape, length_m).windows(2) {
        let ([x0, r0], [x1, r1]) = (pair[0], pair[1]);
        let (h, sum) = (x1 - x0, r0 + r1);
        if h > 0.0 && sum > 0.0 {
            // Both sides of the axis; centroid of a trapezium.
            add(h * sum, x0 + h * (r0 + 2.0 * r1) / (3.0 * sum));
        }
    }
    for f in &shape.fins {
        let (cr, ct, s) = (f.root_chord_m, f.tip_chord_m, f.exposed_semispan_m);
        let sum = cr + ct;
        let x = f.sweep_distance_m * (cr + 2.0 * ct) / (3.0 * sum) + (cr * cr + cr * ct + ct * ct) / (3.0 * sum);
        add(2.0 * 0.5 * sum * s, f.station_m + x);
    }
    (area > 0.0).then(|| moment / area)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn noses_begin_at_nil_and_end_at_their_base() {
        for shape in [NoseShape::Cone, NoseShape::Ogive, NoseShape::Paraboloid, NoseShape::Ellipsoid] {
            let n = Nose { shape, length_m: 0.3, diameter_m: 0.08 };
            assert!(nose_radius(&n, 0.0).abs() < 1e-12 && (nose_radius(&n, 1.0) - 1.0).abs() < 1e-12, "{shape:?}");
        }
    }

    /// Cone of 0.3 m on a cylinder of 0.7 m, no fins: areas 0.3·d/2 at 0.2 m and 0.7·d at 0.65 m.
    #[test]
    fn the_outline_of_a_cone_and_a_tube() {
        let nose = Nose { shape: NoseShape::Cone, length_m: 0.3, diameter_m: 0.1 };
        let shape = Shape { nose, transitions: vec![], fins: vec![] };
        let expected = (0.15 * 0.2 + 0.7 * 0.65) / 0.85;
        assert!((side_centroid(&shape, 1.0).expect("a centroid") - expected).abs() < 1e-12);
    }

    /// Two rectangular fins of 0.1 by 0.05 m at 0.8 m: 0.01 m² at 0.85 m.
    #[test]
    fn fins_count_twice_in_the_outline() {
        let nose = Nose { shape: NoseShape::Cone, length_m: 0.3, diameter_m: 0.1 };
        let fin = Fins {
            count: 4,
            station_m: 0.8,
            root_chord_m: 0.1,
            tip_chord_m: 0.1,
            exposed_semispan_m: 0.05,
            sweep_distance_m: 0.0,
            body_diameter_m: 0.1,
        };
        let shape = Shape { nose, transitions: vec![], fins: vec![fin] };
        let expected = (0.015 * 0.2 + 0.07 * 0.65 + 0.01 * 0.85) / 0.095;
        assert!((side_centroid(&shape, 1.0).expect("a centroid") - expected).abs() < 1e-12);
    }
}
