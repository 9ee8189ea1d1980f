//! A real hot fire, read in place beside the project; where the file is absent the test says so and skips.
//!
//! Source: UVicRocketry/Propulsion-Test-Data on GitHub, folder 2025-02-08. 0.6 s of record before ignition, a rough start that
//! swings by hundreds of newtons, a thrust channel still decaying when the record ends.

use burntally::firing::Status;
use std::path::Path;

#[test]
fn the_hot_fire_reduces_with_every_awkwardness_reported() {
    let log = Path::new(env!("CARGO_MANIFEST_DIR")).join("../shared/real-logs/hotfire-2025-02-08.csv");
    if !log.exists() {
        println!("skipped: {} is absent", log.display());
        return;
    }
    let dir = tempfile::tempdir().expect("a temporary folder");
    let run = format!(
        "[run]\nid = \"hotfire\"\n[log]\nfile = {:?}\n[[channel]]\nrole = \"force\"\ncolumn = \"L_THRUST\"\nunit = \"N\"\n[stand]\norientation = \"horizontal\"\n",
        log.canonicalize().expect("a path").display().to_string()
    );
    let path = dir.path().join("run.toml");
    std::fs::write(&path, run).expect("run.toml");
    let inputs = burntally::load::load_run(&path).expect("the log is read");
    let firing = burntally::reduce::reduce(&inputs).expect("the log reduces").firing;
    assert_eq!((firing.provenance.records.read, firing.provenance.records.kept), (6503, 6503));
    let check = |id: &str| firing.checks.iter().find(|c| c.id == id).expect("the check").clone();
    assert_eq!(check("baseline_before").status, Status::Caution, "{}", check("baseline_before").message);
    assert_eq!(check("baseline_after").status, Status::Fail, "{}", check("baseline_after").message);
    assert_eq!(check("baseline_shift").status, Status::Caution, "{}", check("baseline_shift").message);
    let q = &firing.quantities;
    let value = |f: &Option<burntally::firing::Figure>| f.as_ref().expect("a figure").value;
    // Trapezoid sum over the whole record with the mean of its first 0.5 s as zero, in plain Python: 1549.7 N.s; the tail comes
    // on top and apart.
    let (total, tail) = (value(&q.total_impulse), value(&q.extrapolated_impulse));
    assert!(((total - tail) / 1549.7 - 1.0).abs() < 0.01, "{total} less {tail}");
    assert!(tail > 20.0 && tail < 300.0, "{tail}");
    // The scale's error was not stated: no uncertainty may be claimed for what depends on it.
    assert_eq!(q.total_impulse.as_ref().and_then(|f| f.standard_uncertainty), None);
    assert!(q.burn_time.as_ref().and_then(|f| f.standard_uncertainty).is_some());
    assert!((firing.burn.start_s - 0.65).abs() < 0.15, "{:?}", firing.burn);
    // The rough start swings; every swing belongs to the one burn.
    assert_eq!(firing.bursts.iter().filter(|b| b.kind == burntally::firing::BurstKind::Burn).count(), 1);
}
