//! Worked examples of JCGM 100:2008 and JCGM 101:2008 through the program's own uncertainty code.
//!
//! tests/reference/item02_gum.json says which of the printed values were read in a public text and which are from memory; all are
//! recomputed there at high precision. Printed values are rounded on the way (H.1, H.2), so the recomputed ones are held.

use burntally::calibration::load_text;
use burntally::run::SiteSpec;
use burntally::uncertainty::distribution::Shape;
use burntally::uncertainty::effects::{Effect, Propagated};
use burntally::uncertainty::monte_carlo::{self, SEED, Source, Spread};
use burntally::uncertainty::propagation::{self, Combined};
use nalgebra::DMatrix;
use serde_json::Value;
use std::path::Path;

fn reference() -> Value {
    serde_json::from_str(include_str!("reference/item02_gum.json")).expect("reference")
}

fn number(value: &Value) -> f64 {
    value.as_f64().expect("a number")
}

fn numbers(value: &Value) -> Vec<f64> {
    value.as_array().expect("an array").iter().map(number).collect()
}

fn sources(shapes: &[Shape]) -> Vec<Source> {
    shapes.iter().map(|shape| Source::from(*shape)).collect()
}

/// A model's output by Monte Carlo; the model gets its inputs' errors in standard uncertainties.
fn trials(count: usize, shapes: &[Shape], model: impl Fn(&[f64]) -> f64 + Sync) -> Spread {
    let mut drawn = monte_carlo::propagate(count, &sources(shapes), 1, SEED, |x, y| y[0] = model(x)).remove(0);
    monte_carlo::spread(&mut drawn).expect("a spread")
}

/// The same output by the law of propagation.
fn first_order(shapes: &[Shape], model: impl Fn(&[f64]) -> f64) -> Combined {
    let effects = propagation::effects(shapes.len(), 1, |x, y| y[0] = model(x)).concat();
    propagation::combine(&effects, &sources(shapes))
}

fn near(found: f64, expected: f64, tolerance: f64) {
    assert!((found - expected).abs() <= tolerance, "{found} is not {expected} within {tolerance}");
}

/// JCGM 100:2008 annex H.3: the calibration of a thermometer, a line through eleven points about 20 degrees, as a calibration file.
#[test]
fn a_line_and_its_prediction() {
    let table: Vec<(f64, f64)> = include_str!("reference/gum_h3.csv")
        .lines()
        .skip(1)
        .filter_map(|l| l.split_once(','))
        .map(|(t, b)| (t.trim().parse().expect("t"), b.trim().parse().expect("b")))
        .collect();
    assert_eq!(table.len(), 11);
    let points: Vec<String> = table.iter().map(|(t, b)| format!("[{:?}, {b:?}]", t - 20.0)).collect();
    let text =
        format!("[points]\nunit = \"N\"\nreading_unit = \"mV\"\nup = [{}]\n[fit]\ndegree = 1\n", points.join(", "));
    let calibrated = load_text(Path::new("h3.toml"), &text, &SiteSpec::default(), None).expect("a calibration");
    let report = &calibrated.report;
    let expected = &reference()["GUM_H3"]["recomputed"];
    let covariance = report.covariance.as_ref().expect("covariance");
    // The temperatures lose their last digits in t - 20: ten digits are left.
    near(report.coefficients[0], number(&expected["y1"]), 1e-9);
    near(report.coefficients[1], number(&expected["y2"]), 1e-10);
    near(covariance[0][0].sqrt(), number(&expected["s_y1"]), 1e-9);
    near(covariance[1][1].sqrt(), number(&expected["s_y2"]), 1e-10);
    near(covariance[0][1] / (covariance[0][0] * covariance[1][1]).sqrt(), number(&expected["r"]), 1e-7);
    near(report.residual_standard_deviation.expect("s"), number(&expected["s"]), 1e-9);
    // Prediction at 30 degrees, 10 from the reference; the error directions of the calibration add up to its uncertainty.
    let at = 10.0;
    near(report.coefficients[0] + report.coefficients[1] * at, number(&expected["b_30C"]), 1e-8);
    let effects: Vec<Effect> = calibrated
        .calibration
        .errors
        .as_ref()
        .expect("errors")
        .iter()
        .filter(|d| d.source == burntally::calibration::ScaleSource::Fit)
        .map(|d| Effect {
            peak_thrust: calibrated.calibration.force_error_n(d, at) * report.coefficients[1],
            ..Effect::of("fit")
        })
        .collect();
    let u = Propagated::collect(&effects, |e| e.peak_thrust).standard_uncertainty();
    near(u, number(&expected["uc_b_30C"]), 1e-8);
    assert_eq!(report.residual_degrees_of_freedom, 9);
    // Both coefficients are judged by one scatter: the prediction is Student's t with its degrees of freedom, whose variance
    // is 9/7 of u². The standard deviation of 200,000 such trials is good to 0.3 %, the ends of their interval to 0.6 %.
    let source = Source { shape: Shape::of_estimate(9.0), scatter: Some(0) };
    let step: Vec<f64> = effects.iter().map(|e| e.peak_thrust).collect();
    let model = |z: &[f64], out: &mut [f64]| out[0] = z.iter().zip(&step).map(|(z, step)| z * step).sum();
    let mut drawn = monte_carlo::propagate(200_000, &vec![source; step.len()], 1, SEED, model).remove(0);
    let spread = monte_carlo::spread(&mut drawn).expect("a spread");
    near(spread.standard_deviation, u * (9.0f64 / 7.0).sqrt(), 0.01 * u);
    let combined = propagation::combine(&step, &vec![source; step.len()]);
    near(combined.degrees_of_freedom, 9.0, 1e-9);
    for (end, sign) in spread.shortest_95.into_iter().zip([-1.0, 1.0]) {
        near(end, sign * combined.half_width(0.95), 0.02 * combined.half_width(0.95));
    }
}

/// JCGM 100:2008 annex H.1: end-gauge calibration; first order with degrees of freedom, second order by trials.
#[test]
fn an_end_gauge() {
    let h1 = &reference()["GUM_H1"];
    let (inputs, expected) = (&h1["inputs"], &h1["recomputed"]);
    let get = |key: &str| number(&inputs[key]);
    let root3 = 3f64.sqrt();
    // The difference of two lengths, of three parts; the example goes on with it as one input, its degrees of freedom
    // unrounded (trap: 25.6 is printed, 25.45 is what the parts give).
    let parts = numbers(&inputs["u_d_parts_nm"]);
    let shapes: Vec<Shape> = numbers(&inputs["nu_d_parts"]).into_iter().map(Shape::StudentT).collect();
    let difference = propagation::combine(&parts, &sources(&shapes));
    near(difference.standard_uncertainty, number(&expected["u_d"]), 1e-9);
    near(difference.degrees_of_freedom, number(&expected["nu_d"]), 1e-9);

    let length = |x: &[f64]| {
        let l = get("lS_nm") + get("u_lS_nm") * x[0];
        let d = get("d_nm") + difference.standard_uncertainty * x[1];
        let alpha = get("alpha_S") + get("a_alpha_S") / root3 * x[2];
        let delta_alpha = get("a_delta_alpha") / root3 * x[3];
        let swing = get("Delta_arcsine_half_width") / 2f64.sqrt() * x[5];
        let theta = get("theta_bar") + get("u_theta_bar") * x[4] + swing;
        let delta_theta = get("a_delta_theta") / root3 * x[6];
        l + d - l * (delta_alpha * theta + alpha * delta_theta)
    };
    // Degrees of freedom as the example judges them, those of stated limits among them (JCGM 100:2008 G.4.2).
    let judged = [
        Shape::StudentT(get("nu_lS")),
        Shape::StudentT(difference.degrees_of_freedom),
        Shape::Rectangular,
        Shape::StudentT(get("nu_delta_alpha")),
        Shape::Normal,
        Shape::ArcSine,
        Shape::StudentT(get("nu_delta_theta")),
    ];
    let combined = first_order(&judged, length);
    // Differences of numbers of 5e7 keep eight digits.
    near(combined.standard_uncertainty, number(&expected["uc_nm"]), 1e-4);
    assert_eq!(combined.standard_uncertainty.round(), number(&h1["printed"]["uc_nm"]));
    near(combined.degrees_of_freedom, number(&expected["nu_eff_unrounded"]), 1e-2);
    assert_eq!(combined.degrees_of_freedom.floor(), number(&h1["printed"]["nu_eff"]));
    // The example cuts the degrees of freedom to a whole number (trap: U is printed as 93, unrounded it is 92.5).
    let whole = Combined { degrees_of_freedom: combined.degrees_of_freedom.floor(), ..combined };
    near(whole.half_width(0.99), number(&expected["U99_nm"]), 1e-3);

    // Second order: the products of small errors count too. Their variance does not depend on the shapes, so limits are limits here
    // and the rest is normal. A standard deviation of 400,000 trials is good to 0.11 %.
    let shapes = [
        Shape::Normal,
        Shape::Normal,
        Shape::Rectangular,
        Shape::Rectangular,
        Shape::Normal,
        Shape::ArcSine,
        Shape::Rectangular,
    ];
    let spread = trials(400_000, &shapes, length);
    let second = number(&expected["uc_with_second_order_nm"]);
    near(spread.standard_deviation, second, 0.0045 * second);
    near(spread.mean, number(&expected["l_nm"]), 4.0 * second / 400_000f64.sqrt());
}

/// JCGM 100:2008 annex H.2: resistance and reactance measured together, inputs correlated.
#[test]
fn correlated_inputs() {
    let h2 = &reference()["GUM_H2"];
    let readings = [numbers(&h2["V_volt"]), numbers(&h2["I_mA"]), numbers(&h2["phi_rad"])];
    let n = readings[0].len() as f64;
    let mean: Vec<f64> = readings.iter().map(|r| r.iter().sum::<f64>() / n).collect();
    let covariance = DMatrix::from_fn(3, 3, |i, j| {
        readings[i].iter().zip(&readings[j]).map(|(a, b)| (a - mean[i]) * (b - mean[j])).sum::<f64>() / (n * (n - 1.0))
    });
    let expected = &h2["recomputed"];
    for (name, i, j) in [("r_VI", 0, 1), ("r_Vphi", 0, 2), ("r_Iphi", 1, 2)] {
        let r = covariance[(i, j)] / (covariance[(i, i)] * covariance[(j, j)]).sqrt();
        near(r, number(&expected[name]), 1e-9);
    }
    let directions = propagation::directions(&covariance);
    assert_eq!(directions.len(), 3);
    let model = |z: &[f64], out: &mut [f64]| {
        let input = |k: usize| mean[k] + z.iter().zip(&directions).map(|(z, d)| z * d[k]).sum::<f64>();
        let (v, i, phi) = (input(0), input(1) * 1e-3, input(2));
        out.copy_from_slice(&[v / i * phi.cos(), v / i * phi.sin(), v / i]);
    };
    let mut value = [0.0; 3];
    model(&[0.0; 3], &mut value);
    let effects = propagation::effects(3, 3, model);
    let of = |output: usize| effects.iter().map(|e| e[output]).collect::<Vec<f64>>();
    let u: Vec<f64> =
        (0..3).map(|k| propagation::combine(&of(k), &sources(&[Shape::Normal; 3])).standard_uncertainty).collect();
    for (k, name) in ["R", "X", "Z"].iter().enumerate() {
        near(value[k], number(&expected[name]), 1e-9 * value[k]);
        // The inputs' errors are some 1e-4 of them: steps of one standard uncertainty leave 1e-8 to the third order.
        near(u[k], number(&expected[format!("u_{name}")]), 1e-6 * u[k]);
    }
    // What two outputs share shows in the products of their effects.
    for (name, a, b) in [("r_RX", 0, 1), ("r_RZ", 0, 2), ("r_XZ", 1, 2)] {
        let product: f64 = effects.iter().map(|e| e[a] * e[b]).sum();
        near(product / (u[a] * u[b]), number(&expected[name]), 1e-6);
    }
    // The same by trials: correlations of 200,000 are good to 0.0022, standard deviations to 0.16 %.
    let drawn = monte_carlo::propagate(200_000, &sources(&[Shape::Normal; 3]), 3, SEED, model);
    let centred = |k: usize| drawn[k].iter().map(move |x| x - value[k]);
    let product = |a: usize, b: usize| centred(a).zip(centred(b)).map(|(a, b)| a * b).sum::<f64>() / 200_000.0;
    for (k, u) in u.iter().enumerate() {
        near(product(k, k).sqrt(), *u, 0.007 * u);
    }
    near(product(0, 1) / (u[0] * u[1]), number(&expected["r_RX"]), 0.01);
}

/// JCGM 101:2008 clause 9.2: the sum of four inputs.
#[test]
fn four_inputs_added() {
    let reference = reference();
    let cases = &reference["JCGM101_9_2"];
    let million = 1_000_000;
    let sum = |x: &[f64]| x.iter().sum::<f64>();
    let half = |s: &Spread| 0.5 * (s.shortest_95[1] - s.shortest_95[0]);
    let normal = trials(million, &[Shape::Normal; 4], sum);
    near(normal.standard_deviation, 2.0, 0.006);
    near(half(&normal), number(&cases["normal_u1"]["exact_half_width"]), 0.02);
    let rectangular = trials(million, &[Shape::Rectangular; 4], sum);
    near(half(&rectangular), number(&cases["rectangular_u1"]["exact_half_width_inclusion_exclusion"]), 0.02);
    let unequal = trials(million, &[Shape::Rectangular; 4], |x| x[0] + x[1] + x[2] + 10.0 * x[3]);
    let expected = &cases["rectangular_u1_u1_u1_u10"];
    near(unequal.standard_deviation, number(&expected["u_exact"]), 0.02);
    near(half(&unequal), number(&expected["exact_half_width"]), 0.05);
    // First order with a normal distribution: 19.9, which the trials show to be too wide.
    let combined = first_order(&[Shape::Rectangular; 4], |x| x[0] + x[1] + x[2] + 10.0 * x[3]);
    near(combined.half_width(0.95), number(&expected["GUF_half_width"]), 1e-6);
    // By more than the tolerance of two digits (JCGM 101:2008 8.1), a tenth of that of one.
    assert!(combined.half_width(0.95) - half(&unequal) > combined.numerical_tolerance() / 10.0);
}

/// JCGM 101:2008 clause 9.3: calibration of a weight in air; first order misses the products of the densities' errors.
#[test]
fn a_weight_in_air() {
    let reference = reference();
    let case = &reference["JCGM101_9_3"];
    let limits = |key: &str| {
        let list = case["inputs"][key].as_array().expect("limits");
        (number(&list[1]), number(&list[2]))
    };
    let (reference_mg, reference_u) = limits("m_Rc_mg");
    let (difference_mg, difference_u) = limits("dm_Rc_mg");
    let middle = |(low, high): (f64, f64)| (0.5 * (low + high), 0.5 * (high - low) / 3f64.sqrt());
    let (air, weight, standard) = (middle(limits("rho_a")), middle(limits("rho_W")), middle(limits("rho_R")));
    let shapes = [Shape::Normal, Shape::Normal, Shape::Rectangular, Shape::Rectangular, Shape::Rectangular];
    let mass_mg = |x: &[f64]| {
        let mass = reference_mg + reference_u * x[0] + difference_mg + difference_u * x[1];
        let (air, weight, standard) =
            (air.0 + air.1 * x[2], weight.0 + weight.1 * x[3], standard.0 + standard.1 * x[4]);
        mass * (1.0 + (air - 1.2) * (1.0 / weight - 1.0 / standard)) - 100_000.0
    };
    let spread = trials(1_000_000, &shapes, mass_mg);
    let expected = &case["recomputed"]["MCM"];
    near(spread.mean, number(&expected["mean"]), 0.0003);
    near(spread.standard_deviation, number(&expected["u"]), 0.0003);
    let interval = numbers(&expected["shortest95"]);
    // The ends of a shortest interval scatter more than its length.
    near(spread.shortest_95[0], interval[0], 0.002);
    near(spread.shortest_95[1], interval[1], 0.002);
    let symmetric = numbers(&expected["symmetric95"]);
    near(spread.symmetric_95[0], symmetric[0], 0.001);
    near(spread.symmetric_95[1], symmetric[1], 0.001);
    // First order: the sensitivities to the densities of weight and standard are nil at an air density of 1.2, and that to
    // the air's density is nil at equal densities.
    let combined = first_order(&shapes, mass_mg);
    near(combined.standard_uncertainty, number(&case["recomputed"]["GUF_first_order_u"]), 1e-6);
    let interval = numbers(&case["recomputed"]["GUF_first_order_95"]);
    near(difference_mg - combined.half_width(0.95), interval[0], 1e-5);
    near(difference_mg + combined.half_width(0.95), interval[1], 1e-5);
    // The two ways differ by more than the tolerance of one digit, so that the trials' interval is the one to give (8.1).
    assert!((spread.shortest_95[1] - interval[1]).abs() > combined.numerical_tolerance());
}
