//! Rail, air and centre of pressure against closed forms and computed examples.

use burntally::preflight::atmosphere;
use burntally::preflight::pressure_centre::{barrowman, fins, nose, transition};
use burntally::preflight::rail::{Launch, Stays, Thrust, leave, simple_exit_speed_m_s};
use burntally::preflight::vehicle::{Fins, Nose, NoseShape, Shape, Transition};
use serde_json::Value;

fn json(text: &str) -> Value {
    serde_json::from_str(text).expect("reference")
}

fn number(v: &Value) -> f64 {
    v.as_f64().unwrap_or_else(|| panic!("{v} is no number"))
}

fn launch(length_m: f64, mass_kg: f64, elevation_deg: f64) -> Launch {
    Launch {
        length_m,
        elevation_rad: elevation_deg.to_radians(),
        friction_coefficient: 0.0,
        gravity_m_s2: 9.80665,
        mass_kg,
        propellant_kg: 0.0,
        drag_kg_m: 0.0,
        thrust_factor: 1.0,
    }
}

/// Constant thrust, no drag: v = √(2 a L), t = √(2 L/a), a = T/m − g (sin θ + μ cos θ). Values of item 5 beside it.
#[test]
fn constant_thrust() {
    let reference = json(include_str!("reference/item05_motor_classes.json"));
    for row in reference["rail_exit_check_values"]["values"].as_array().expect("rows") {
        let of = |key: &str| number(&row[key]);
        let l = launch(of("rail_m"), of("mass_kg"), of("rail_elevation_deg"));
        let exit = leave(&Thrust::new(vec![0.0, 5.0], vec![of("thrust_N"); 2]), &l).expect("it leaves");
        assert!((exit.speed_m_s / of("exit_m_s") - 1.0).abs() < 1e-6, "{exit:?}");
        assert!((exit.time_s / of("time_s") - 1.0).abs() < 1e-6, "{exit:?}");
        assert!((exit.mean_thrust_n / of("thrust_N") - 1.0).abs() < 1e-9 && exit.held_s == 0.0);
        assert!((exit.mean_thrust_n / (of("mass_kg") * 9.80665) / of("thrust_to_weight") - 1.0).abs() < 1e-9);
        let simple = simple_exit_speed_m_s(of("thrust_N"), &l).expect("it lifts");
        assert!((simple / of("exit_m_s") - 1.0).abs() < 1e-12);
    }
    let rubbing = Launch { friction_coefficient: 0.2, ..launch(2.0, 3.0, 80.0) };
    let a = 200.0 / 3.0 - 9.80665 * (80f64.to_radians().sin() + 0.2 * 80f64.to_radians().cos());
    let exit = leave(&Thrust::new(vec![0.0, 5.0], vec![200.0; 2]), &rubbing).expect("it leaves");
    assert!((exit.speed_m_s / (4.0 * a).sqrt() - 1.0).abs() < 1e-6);
    assert!((exit.time_s / (4.0 / a).sqrt() - 1.0).abs() < 1e-6);
}

/// F = k t: held until k t = m g; with s = t − t₀ then m v = k s²/2, m x = k s³/6.
#[test]
fn linearly_rising_thrust() {
    let (mass, slope, length) = (2.5, 800.0, 1.4);
    let l = launch(length, mass, 90.0);
    let exit = leave(&Thrust::new(vec![0.0, 1.0], vec![0.0, slope]), &l).expect("it leaves");
    let s = (6.0 * mass * length / slope).cbrt();
    assert!((exit.held_s - mass * 9.80665 / slope).abs() < 1e-9);
    assert!((exit.time_s / s - 1.0).abs() < 1e-6, "{exit:?} {s}");
    assert!((exit.speed_m_s / (slope * s * s / (2.0 * mass)) - 1.0).abs() < 1e-6);
    assert!((exit.lowest_thrust_n - mass * 9.80665).abs() < 1e-6);
    assert!((exit.mean_thrust_n - slope * (exit.held_s + 0.5 * s)).abs() < 1e-6);
}

/// Drag alone against a constant thrust, level rail: v² = (F/c) (1 − exp(−2 c L/m)), c = ½ ρ c_d A.
#[test]
fn drag() {
    let l = Launch { drag_kg_m: 0.02, ..launch(30.0, 2.0, 0.0) };
    let exit = leave(&Thrust::new(vec![0.0, 9.0], vec![50.0; 2]), &l).expect("it leaves");
    let expected = (50.0 / 0.02 * (1.0 - (-2.0 * 0.02 * 30.0 / 2.0_f64).exp())).sqrt();
    assert!((exit.speed_m_s / expected - 1.0).abs() < 1e-6, "{} {expected}", exit.speed_m_s);
}

/// Constant thrust, level rail, mass falling evenly: v = (F/q) ln(m₀/(m₀ − q t)), q = m_p/t_b.
#[test]
fn falling_mass() {
    let (force, mass, propellant, burn_s) = (100.0, 2.0, 0.8, 1.0);
    let l = Launch { propellant_kg: propellant, ..launch(4.0, mass, 0.0) };
    let exit = leave(&Thrust::new(vec![0.0, burn_s], vec![force; 2]), &l).expect("it leaves");
    let left = mass - propellant * exit.time_s / burn_s;
    let expected = force * burn_s / propellant * (mass / left).ln();
    assert!((exit.speed_m_s / expected - 1.0).abs() < 1e-6);
    assert!((exit.burned - exit.time_s / burn_s).abs() < 1e-9);
}

#[test]
fn what_does_not_leave() {
    let weak = Thrust::new(vec![0.0, 1.0], vec![15.0; 2]);
    assert_eq!(leave(&weak, &launch(1.0, 2.0, 90.0)), Err(Stays::NeverLifts));
    let short = Thrust::new(vec![0.0, 0.1, 0.11], vec![60.0, 60.0, 0.0]);
    assert_eq!(leave(&short, &launch(5.0, 2.0, 90.0)), Err(Stays::Falls));
}

/// Four times as many points on the same straight lines change nothing.
#[test]
fn points_on_a_line_change_nothing() {
    let coarse = Thrust::new(vec![0.0, 0.02, 1.0, 1.2], vec![0.0, 150.0, 120.0, 0.0]);
    let (t, f) = coarse.points();
    let mut fine = (Vec::new(), Vec::new());
    for i in 1..t.len() {
        for k in 0..4 {
            let part = f64::from(k) / 4.0;
            fine.0.push(t[i - 1] + part * (t[i] - t[i - 1]));
            fine.1.push(f[i - 1] + part * (f[i] - f[i - 1]));
        }
    }
    fine.0.push(1.2);
    fine.1.push(0.0);
    let l = Launch { propellant_kg: 0.05, drag_kg_m: 0.002, ..launch(1.5, 2.0, 85.0) };
    let (a, b) = (leave(&coarse, &l).expect("it leaves"), leave(&Thrust::new(fine.0, fine.1), &l).expect("it leaves"));
    assert!((a.speed_m_s / b.speed_m_s - 1.0).abs() < 1e-9 && (a.time_s - b.time_s).abs() < 1e-9);
}

/// U.S. Standard Atmosphere, 1976, table I: density at geometric height (values from memory, and 1.2250 at sea level by definition).
#[test]
fn the_standard_atmosphere() {
    for (height_m, density) in [(0.0, 1.2250), (1000.0, 1.1117), (2000.0, 1.0066), (3000.0, 0.90925), (5000.0, 0.73643)]
    {
        let found = atmosphere::density_kg_m3(height_m, atmosphere::temperature_k(height_m));
        assert!((found / density - 1.0).abs() < 1e-4, "{height_m}: {found}");
    }
    // At one pressure density goes with the inverse of temperature.
    let warm = atmosphere::density_kg_m3(0.0, 303.15);
    assert!((warm * 303.15 / (1.2250 * 288.15) - 1.0).abs() < 1e-4);
}

/// Item 10 of the reference values: equations of J. S. Barrowman (1966, 1967); the examples are computed, not published.
#[test]
fn barrowman_examples() {
    let reference = json(include_str!("reference/item10_barrowman.json"));
    let shapes = [NoseShape::Ogive, NoseShape::Cone, NoseShape::Paraboloid, NoseShape::Ogive];
    let examples = reference["computed_examples"].as_array().expect("examples");
    assert_eq!(examples.len(), shapes.len());
    for (example, shape) in examples.iter().zip(shapes) {
        let f = &example["fins"];
        let of = |key: &str| number(&f[key]);
        // The examples refer to the diameter of the nose's base.
        let reference_m = of("d");
        let n = Nose { shape, length_m: number(&example["nose_length"]), diameter_m: reference_m };
        let fin = Fins {
            count: of("N") as usize,
            station_m: of("XB"),
            root_chord_m: of("Cr"),
            tip_chord_m: of("Ct"),
            exposed_semispan_m: of("S"),
            sweep_distance_m: of("Xr"),
            body_diameter_m: 2.0 * of("R"),
        };
        let t = &example["transition"];
        let transitions: Vec<Transition> = (!t.is_null())
            .then(|| Transition {
                station_m: number(&t["XP"]),
                length_m: number(&t["LT"]),
                diameter_ahead_m: number(&t["dF"]),
                diameter_behind_m: number(&t["dR"]),
            })
            .into_iter()
            .collect();
        let mut parts = vec![nose(&n, reference_m)];
        parts.extend(transitions.iter().map(|t| transition(t, reference_m)));
        parts.push(fins(&fin, reference_m));
        for (part, expected) in parts.iter().zip(example["parts"].as_array().expect("parts")) {
            assert!((part.slope - number(&expected["CNa"])).abs() < 1e-9, "{part:?} {expected}");
            assert!((part.station_m - number(&expected["X"])).abs() < 1e-9, "{part:?} {expected}");
        }
        let whole = Shape { nose: n, transitions, fins: vec![fin] };
        let expected = number(&example["X_cp"]);
        for reference_m in [reference_m, 2.0 * reference_m] {
            // The centre does not mind what the slopes refer to.
            assert!((barrowman(&whole, reference_m).expect("a centre") - expected).abs() < 1e-9);
        }
    }
}

/// By hand. Cone of 0.3 m, four rectangular fins of chord and span 0.1 m on a body of 0.1 m, at 0.9 m: nose 2 at 0.2 m; fins
/// (1 + 0.05/0.15) 16 (1)²/(1 + √(1 + (2·0.1/0.2)²)) = 8.836556 at 0.9 + (0.2 − 0.05)/6 = 0.925 m; whole (0.4 + 8.173814)/10.836556 = 0.791194 m.
#[test]
fn four_fins_by_hand() {
    let n = Nose { shape: NoseShape::Cone, length_m: 0.3, diameter_m: 0.1 };
    let f = Fins {
        count: 4,
        station_m: 0.9,
        root_chord_m: 0.1,
        tip_chord_m: 0.1,
        exposed_semispan_m: 0.1,
        sweep_distance_m: 0.0,
        body_diameter_m: 0.1,
    };
    let part = fins(&f, 0.1);
    assert!((part.slope - 8.836_556).abs() < 1e-6 && (part.station_m - 0.925).abs() < 1e-12, "{part:?}");
    let cp = barrowman(&Shape { nose: n, transitions: vec![], fins: vec![f] }, 0.1).expect("a centre");
    assert!((cp - 0.791_194).abs() < 1e-6, "{cp}");
}

/// By hand. Ogive of 0.3 m: 2 at 0.466·0.3 = 0.1398 m. Three fins, chords 0.15 and 0.05 m, span 0.1 m, swept by 0.1 m, at 0.85 m on a body of 0.1 m: mid-chord
/// line √(0.1² + 0.05²), (1 + 0.05/0.15) 12/(1 + √2.25) = 6.4 at 0.85 + (0.1/3)(0.25/0.2) + (0.2 − 0.0375)/6 = 0.91875 m; whole
/// (0.2796 + 5.88)/8.4 = 0.733286 m.
#[test]
fn three_fins_by_hand() {
    let n = Nose { shape: NoseShape::Ogive, length_m: 0.3, diameter_m: 0.1 };
    let f = Fins {
        count: 3,
        station_m: 0.85,
        root_chord_m: 0.15,
        tip_chord_m: 0.05,
        exposed_semispan_m: 0.1,
        sweep_distance_m: 0.1,
        body_diameter_m: 0.1,
    };
    let part = fins(&f, 0.1);
    assert!((part.slope - 6.4).abs() < 1e-9 && (part.station_m - 0.91875).abs() < 1e-9, "{part:?}");
    let cp = barrowman(&Shape { nose: n, transitions: vec![], fins: vec![f] }, 0.1).expect("a centre");
    assert!((cp - 0.733_286).abs() < 1e-6, "{cp}");
}
