//! Statistics of the comparison against scipy and the NIST/SEMATECH e-Handbook.

use burntally::compare::{components, outliers, pairwise, sample, studentised_range, tolerance, trends};
use serde_json::Value;

fn json(text: &str) -> Value {
    serde_json::from_str(text).expect("reference")
}

/// tests/reference/compare_vectors.json, written by compare_vectors.py beside it.
fn vectors() -> Value {
    json(include_str!("reference/compare_vectors.json"))
}

/// NIST/SEMATECH e-Handbook of Statistical Methods; the entries name their pages.
fn handbook() -> Value {
    json(include_str!("reference/item03_handbook_stats.json"))
}

fn numbers(v: &Value) -> Vec<f64> {
    v.as_array().expect("a list").iter().map(number).collect()
}

fn number(v: &Value) -> f64 {
    v.as_f64().expect("a number")
}

#[track_caller]
fn close(found: f64, expected: f64, relative: f64) {
    assert!((found - expected).abs() <= relative * expected.abs().max(1e-12), "{found} and not {expected}");
}

fn groups() -> Vec<Vec<f64>> {
    vectors()["groups"].as_array().expect("groups").iter().map(numbers).collect()
}

#[test]
fn analysis_of_variance_agrees_with_scipy() {
    let v = vectors();
    let anova = pairwise::analysis_of_variance(&groups()).expect("a test");
    close(anova.statistic, number(&v["anova"]["F"]), 1e-9);
    close(anova.p_value, number(&v["anova"]["p"]), 1e-7);
    let welch = pairwise::welch_anova(&groups()).expect("a test");
    close(welch.statistic, number(&v["welch_anova"]["F"]), 1e-9);
    close(welch.p_value, number(&v["welch_anova"]["p"]), 1e-7);
}

#[test]
fn pairwise_differences_agree_with_scipy() {
    let (v, groups) = (vectors(), groups());
    let found = pairwise::differences(&groups);
    let pairs = v["pairs"].as_array().expect("pairs");
    assert_eq!(found.len(), pairs.len());
    for ((a, b, d), pair) in found.iter().zip(pairs) {
        assert_eq!((*a as f64, *b as f64), (number(&pair["a"]), number(&pair["b"])));
        let t = pairwise::welch_t(&groups[*a], &groups[*b]).expect("a test");
        close(t.statistic, number(&pair["welch_t"]), 1e-9);
        close(t.df[1], number(&pair["welch_df"]), 1e-9);
        close(t.p_value, number(&pair["welch_p"]), 1e-7);
        // scipy integrates the studentised range to some 1e-6.
        close(d.difference - d.half_width_95, number(&pair["tukey_low"]), 1e-4);
        close(d.difference + d.half_width_95, number(&pair["tukey_high"]), 1e-4);
    }
}

#[test]
fn the_studentised_range_agrees_with_scipy() {
    for row in vectors()["studentized_range"].as_array().expect("rows") {
        let q = studentised_range::quantile(number(&row["p"]), number(&row["k"]) as usize, number(&row["df"]));
        close(q.expect("a quantile"), number(&row["q"]), 2e-5);
    }
}

/// e-Handbook 7.2.6.3. The exact two-sided factor printed there, 2.210167, is of another content and confidence than the page says (99 % at
/// 5 %): it is held against that pair.
#[test]
fn tolerance_factors() {
    let t = &handbook()["tolerance_intervals"];
    close(tolerance::one_sided(43, 0.90, 0.99).expect("k"), number(&t["recomputed"]["k1_exact"]), 1e-8);
    close(tolerance::two_sided(43, 0.90, 0.99).expect("k"), number(&t["recomputed"]["k2_exact"]), 1e-8);
    close(tolerance::two_sided(43, 0.99, 0.05).expect("k"), number(&t["printed"]["k2_from_handbook_R_call"]), 5e-7);
    let table = t["table"].as_object().expect("a table");
    assert_eq!(table.len(), 6);
    for (key, rows) in table {
        let part = |name: &str| -> f64 {
            let from = key.find(name).expect(name) + name.len();
            key[from..].split(',').next().and_then(|n| n.parse().ok()).expect("a number")
        };
        for (n, row) in rows.as_object().expect("rows") {
            let n: usize = n.parse().expect("n");
            close(tolerance::one_sided(n, part("p="), part("conf=")).expect("k"), number(&row["k1_exact"]), 1e-7);
            close(tolerance::two_sided(n, part("p="), part("conf=")).expect("k"), number(&row["k2_exact"]), 1e-7);
        }
    }
    for row in vectors()["noncentral_t_factor"].as_array().expect("rows") {
        let k = tolerance::one_sided(number(&row["n"]) as usize, number(&row["content"]), number(&row["confidence"]));
        close(k.expect("k"), number(&row["k"]), 1e-7);
    }
}

/// e-Handbook 1.3.5.17.1, data of Tietjen and Moore. The page's text gives the one-sided 5 % value; the program tests both sides.
#[test]
fn grubbs() {
    let g = &handbook()["grubbs"];
    let data = numbers(&g["data"]);
    let odd = outliers::grubbs(&data, 0.05).expect("an odd value");
    assert_eq!(odd.index, 7);
    close(odd.statistic, number(&g["printed"]["G"]), 1e-4);
    close(odd.critical, number(&g["recomputed"]["critical_two_sided_5pct"]), 1e-9);
    close(
        outliers::grubbs_critical(8, 0.05, 1.0).expect("a value"),
        number(&g["printed"]["critical_one_sided_5pct_n8"]),
        2.5e-4,
    );
    for (n, row) in g["critical_values"].as_object().expect("a table") {
        let n: usize = n.parse().expect("n");
        for (sides, level, key) in
            [(1.0, 0.05, "one_sided_5pct"), (2.0, 0.05, "two_sided_5pct"), (1.0, 0.01, "one_sided_1pct")]
        {
            close(outliers::grubbs_critical(n, level, sides).expect("a value"), number(&row[key]), 1e-8);
        }
    }
}

/// e-Handbook 1.3.5.17.3, data of Rosner: three of 54 values are odd.
#[test]
fn generalised_esd() {
    let e = &handbook()["generalized_esd"];
    let data = numbers(&e["data"]);
    let odd = outliers::generalised_esd(&data, 10, 0.05);
    let steps = e["recomputed"].as_array().expect("steps");
    assert_eq!(odd.len(), 3);
    for (found, step) in odd.iter().zip(steps) {
        close(data[found.index], number(&step["value"]), 1e-12);
        close(found.statistic, number(&step["R"]), 1e-9);
        close(found.critical, number(&step["lambda"]), 1e-9);
    }
}

/// e-Handbook 7.4.3.3 and 7.4.3.4, and GEAR.DAT of 1.3.5.4; printed sums and F, and what they are unrounded.
#[test]
fn one_way_layouts_of_the_handbook() {
    let a = &handbook()["anova_7_4_3"];
    let data: Vec<Vec<f64>> = a["data"].as_array().expect("data").iter().map(numbers).collect();
    let l = components::layout(&data).expect("a layout");
    let printed = &a["printed"];
    assert!((l.between - number(&printed["SST"])).abs() < 5e-4 && (l.within - number(&printed["SSE"])).abs() < 5e-4);
    let test = pairwise::analysis_of_variance(&data).expect("a test");
    assert!((test.statistic - number(&printed["F"])).abs() < 5e-3);
    close(test.p_value, number(&a["recomputed"]["p"]), 1e-9);
    let mut batches: Vec<Vec<f64>> = vec![Vec::new(); 10];
    for line in include_str!("reference/handbook_gear.csv").lines().skip(1) {
        let (batch, diameter) = line.split_once(',').expect("two columns");
        batches[batch.parse::<usize>().expect("a batch") - 1].push(diameter.parse().expect("a diameter"));
    }
    let gear = pairwise::analysis_of_variance(&batches).expect("a test");
    close(gear.statistic, number(&handbook()["gear_batches"]["recomputed"]["anova"]["F"]), 1e-9);
    // Alike in size: n₀ is the size, and the spread between batches is (MS_between − MS_within)/10.
    let c = components::components(&batches).expect("components");
    let expected = (8.100444444444606e-05_f64 - 3.5266666666666625e-05) / 10.0;
    close(c.between_pour_sd, expected.sqrt(), 1e-9);
    close(c.repeatability_sd, number(&handbook()["gear_batches"]["recomputed"]["anova"]["resid_sd"]), 1e-9);
}

/// Item 8 of the reference values: six firings, scipy.
#[test]
fn a_group_of_firings() {
    let r = &json(include_str!("reference/item08_filters_signal.json"))["repeat_firing_stats"];
    let data = numbers(&r["data"]);
    let (mean, sd) = sample::mean_and_sd(&data).expect("a mean");
    let sd = sd.expect("a spread");
    close(mean, number(&r["mean"]), 1e-12);
    close(sd, number(&r["sd"]), 1e-12);
    let half = sample::half_width_95(sd, data.len(), 0.0).expect("a width");
    let [low, high] = [mean - half, mean + half];
    let expected = numbers(&r["ci95_mean"]);
    close(low, expected[0], 1e-9);
    close(high, expected[1], 1e-9);
    close(tolerance::one_sided(6, 0.90, 0.95).expect("k"), number(&r["tolerance_k1_p90_c95"]), 1e-8);
}

#[test]
fn a_trend_agrees_with_scipy() {
    let v = &vectors()["line"];
    let line = trends::line(&numbers(&v["x"]), &numbers(&v["y"])).expect("a line");
    close(line.slope, number(&v["slope"]), 1e-9);
    close(line.intercept, number(&v["intercept"]), 1e-9);
    close(line.slope_standard_error, number(&v["slope_se"]), 1e-9);
    close(line.intercept_standard_error, number(&v["intercept_se"]), 1e-9);
    close(line.p_value, number(&v["p"]), 1e-7);
}

/// Sutton & Biblarz, Rocket Propulsion Elements, 7th ed., Example 11-1 (values of a law rounded for print; the last one of propellant 2 is a
/// slip, which pulls the exponent), in the book's units: the fit does not mind which.
#[test]
fn the_burn_rate_law() {
    let s = &json(include_str!("reference/item11_burn_rate.json"))["sutton_11_1"];
    let pressures = numbers(&s["p_psi"]);
    for (rates, fit) in [("r1", "fit_1"), ("r2", "fit_2_all_five")] {
        let law = trends::burn_rate_law(
            &pressures.iter().map(|p| p * 1e6).collect::<Vec<f64>>(),
            &numbers(&s[rates]).iter().map(|r| r / 1e3).collect::<Vec<f64>>(),
        )
        .expect("a law");
        close(law.exponent, number(&s[fit]["n"]), 1e-9);
        close(law.coefficient_mm_s, number(&s[fit]["a"]), 1e-9);
        let interval = numbers(&s[fit]["ci95_n"]);
        close(law.exponent_interval_95[0], interval[0], 1e-8);
        close(law.exponent_interval_95[1], interval[1], 1e-8);
    }
}
