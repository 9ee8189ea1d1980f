//! Worked examples of JCGM 100:2008 and JCGM 101:2008 through the program's own uncertainty code.
//!
//! tests/reference/item02_gum.json says which of the printed values were read in a public text and which are from memory; all are
//! recomputed there at high precision. Printed values are rounded on the way (H.1, H.2), so the recomputed ones are held.

use burntally::calibration::load_text;
use burntally::run::SiteSpec;
use burntally::uncertainty::distribution::Shape;
use burntally::uncertainty::effects::{Effect, Propagated};
use burntally::uncertainty::monte_carlo::{self, Spread};
use burntally::uncertainty::statistics;
use nalgebra::{Matrix3, Vector3};
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

fn trials(count: usize, inputs: &[Shape], model: impl Fn(&[f64]) -> f64 + Sync) -> Spread {
    let drawn = monte_carlo::propagate(count, inputs, 1, |x, y| y[0] = model(x)).remove(0);
    monte_carlo::spread(drawn).expect("a spread")
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
}

/// JCGM 100:2008 annex H.1: end-gauge calibration; first order with degrees of freedom, second order by trials.
#[test]
fn an_end_gauge() {
    let h1 = &reference()["GUM_H1"];
    let (inputs, expected) = (&h1["inputs"], &h1["recomputed"]);
    let get = |key: &str| number(&inputs[key]);
    let root3 = 3f64.sqrt();
    let (length, alpha, theta) = (get("lS_nm"), get("alpha_S"), get("theta_bar"));
    let part =
        |amount: f64, dof: f64| Effect { total_impulse: amount, ..Effect::of("part").shaped(Shape::StudentT(dof)) };
    let mut effects = vec![
        part(get("u_lS_nm"), get("nu_lS")),
        part(length * theta * get("a_delta_alpha") / root3, get("nu_delta_alpha")),
        part(length * alpha * get("a_delta_theta") / root3, get("nu_delta_theta")),
    ];
    let parts = numbers(&inputs["u_d_parts_nm"]);
    let dofs = numbers(&inputs["nu_d_parts"]);
    let difference: Vec<Effect> = parts.iter().zip(&dofs).map(|(u, dof)| part(*u, *dof)).collect();
    let of = |e: &Effect| e.total_impulse;
    near(Propagated::collect(&difference, of).standard_uncertainty(), number(&expected["u_d"]), 1e-9);
    let u_d = number(&expected["u_d"]);
    // The example goes on with the difference as one input; its degrees of freedom unrounded (trap: 25.6 is printed).
    let nu_d = Propagated::effective_degrees_of_freedom(&difference, of);
    near(nu_d, number(&expected["nu_d"]), 1e-9);
    effects.push(part(u_d, nu_d));
    let u = Propagated::collect(&effects, of).standard_uncertainty();
    near(u, number(&expected["uc_nm"]), 1e-6);
    near(u.round(), number(&h1["printed"]["uc_nm"]), 0.0);
    let nu = Propagated::effective_degrees_of_freedom(&effects, of);
    near(nu, number(&expected["nu_eff_unrounded"]), 0.05);
    assert_eq!(nu.floor(), number(&h1["printed"]["nu_eff"]));
    let k = statistics::t_two_sided(0.99, nu.floor()).expect("k");
    near(k, number(&expected["t99_16"]), 1e-6);
    near(k * u, number(&expected["U99_nm"]), 1e-3);

    // Second order: the products of small errors count too.
    let shapes = [
        Shape::Normal,
        Shape::Normal,
        Shape::Rectangular,
        Shape::Rectangular,
        Shape::Normal,
        Shape::ArcSine,
        Shape::Rectangular,
    ];
    let spread = trials(400_000, &shapes, |x| {
        let l = length + get("u_lS_nm") * x[0];
        let d = get("d_nm") + u_d * x[1];
        let alpha = alpha + get("a_alpha_S") / root3 * x[2];
        let delta_alpha = get("a_delta_alpha") / root3 * x[3];
        let theta = theta + get("u_theta_bar") * x[4] + get("Delta_arcsine_half_width") / 2f64.sqrt() * x[5];
        let delta_theta = get("a_delta_theta") / root3 * x[6];
        l + d - l * (delta_alpha * theta + alpha * delta_theta)
    });
    // A standard deviation of 400,000 trials is good to 0.11 %.
    let second = number(&expected["uc_with_second_order_nm"]);
    near(spread.standard_deviation, second, 0.004 * second);
    near(spread.mean, number(&expected["l_nm"]), 0.3);
}

/// JCGM 100:2008 annex H.2: resistance and reactance measured together, inputs correlated.
#[test]
fn correlated_inputs() {
    let h2 = &reference()["GUM_H2"];
    let readings = [numbers(&h2["V_volt"]), numbers(&h2["I_mA"]), numbers(&h2["phi_rad"])];
    let n = readings[0].len() as f64;
    let mean = Vector3::from_fn(|i, _| readings[i].iter().sum::<f64>() / n);
    let covariance = Matrix3::from_fn(|i, j| {
        readings[i].iter().zip(&readings[j]).map(|(a, b)| (a - mean[i]) * (b - mean[j])).sum::<f64>() / (n * (n - 1.0))
    });
    // Independent directions of the inputs' covariance, each one standard uncertainty long.
    let lower = covariance.cholesky().expect("positive").l();
    let model = |x: &Vector3<f64>| {
        let (v, i, phi) = (x[0], x[1] * 1e-3, x[2]);
        Vector3::new(v / i * phi.cos(), v / i * phi.sin(), v / i)
    };
    let effects: Vec<Effect> = (0..3)
        .map(|k| {
            let step: Vector3<f64> = lower.column(k).into_owned();
            let change = (model(&(mean + step * 1e-3)) - model(&(mean - step * 1e-3))) / 2e-3;
            Effect {
                total_impulse: change[0],
                burn_impulse: change[1],
                peak_thrust: change[2],
                ..Effect::of(format!("{k}"))
            }
        })
        .collect();
    let value = model(&mean);
    let of: [fn(&Effect) -> f64; 3] = [|e| e.total_impulse, |e| e.burn_impulse, |e| e.peak_thrust];
    let expected = &h2["recomputed"];
    for (k, name) in ["R", "X", "Z"].iter().enumerate() {
        near(value[k], number(&expected[name]), 1e-9 * value[k]);
        let u = number(&expected[format!("u_{name}")]);
        near(Propagated::collect(&effects, of[k]).standard_uncertainty(), u, 1e-6 * u);
    }
    // What two outputs share shows in the products of their effects.
    for (name, a, b) in [("r_RX", 0, 1), ("r_RZ", 0, 2), ("r_XZ", 1, 2)] {
        let product: f64 = effects.iter().map(|e| of[a](e) * of[b](e)).sum();
        let u = |k: usize| Propagated::collect(&effects, of[k]).standard_uncertainty();
        near(product / (u(a) * u(b)), number(&expected[name]), 1e-6);
    }
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
    let effects: Vec<Effect> =
        [1.0, 1.0, 1.0, 10.0].map(|u| Effect { total_impulse: u, ..Effect::of(format!("{u}")) }).to_vec();
    let u = Propagated::collect(&effects, |e| e.total_impulse).standard_uncertainty();
    near(statistics::normal_quantile(0.975).expect("k") * u, number(&expected["GUF_half_width"]), 1e-6);
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
    let spread = trials(1_000_000, &shapes, |x| {
        let mass = reference_mg + reference_u * x[0] + difference_mg + difference_u * x[1];
        let (air, weight, standard) =
            (air.0 + air.1 * x[2], weight.0 + weight.1 * x[3], standard.0 + standard.1 * x[4]);
        mass * (1.0 + (air - 1.2) * (1.0 / weight - 1.0 / standard)) - 100_000.0
    });
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
    // First order: the sensitivities to the densities of weight and standard are nil at an air density of 1.2.
    let effects = [reference_u, difference_u].map(|u| Effect { total_impulse: u, ..Effect::of(format!("{u}")) });
    let u = Propagated::collect(&effects, |e| e.total_impulse).standard_uncertainty();
    near(u, number(&case["recomputed"]["GUF_first_order_u"]), 1e-6);
}
