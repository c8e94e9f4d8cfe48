//! NIST Statistical Reference Datasets, univariate: certified means, sds and lag-1 correlations, read from a file
//! of dated readings.

use super::asked::{Spec, answers_beside, linear};
use super::case;
use std::path::Path;

/// The data set with a date for each row, one day after another, as the check of neighbours needs them.
fn dated(name: &str) -> String {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/reference/strd").join(name);
    let text = std::fs::read_to_string(path).expect("a data set");
    let mut date = jiff::civil::date(2000, 1, 1);
    let mut rows = String::from("date,y\n");
    for value in text.lines().skip(1) {
        rows += &format!("{date},{}\n", value.trim());
        date = date.tomorrow().expect("a day after");
    }
    rows
}

#[test]
fn statistical_reference_datasets() {
    // Relative bounds of mean, sd and correlation. The readings are decimal and the numbers binary: those of
    // NumAcc3 are off by up to 5.9e-11, which is 6e-10 of its sd; no arithmetic can do better.
    let sets = [
        ("Lew", "lew.csv", [1e-15, 5e-15, 1e-13]),
        ("Michelso", "michelso.csv", [1e-15, 1e-13, 1e-12]),
        ("PiDigits", "pidigits.csv", [1e-15, 5e-15, 1e-11]),
        ("NumAcc1", "numacc1.csv", [1e-15, 1e-15, 0.0]),
        ("NumAcc2", "numacc2.csv", [1e-15, 2e-15, 5e-14]),
        ("NumAcc3", "numacc3.csv", [1e-15, 6e-10, 1e-9]),
    ];
    let texts: Vec<(&str, String)> = sets.iter().map(|(_, file, _)| (*file, dated(file))).collect();
    let specs: Vec<Spec> = sets
        .iter()
        .map(|(_, file, _)| {
            let keys = format!("file = \"{file}\"\nvalue = \"y\"\ndate = \"date\"\nin_period = \"set\"");
            linear().reviewed("set").file(&keys).within("readings").flat()
        })
        .collect();
    for ((name, _, [mean, sd, lag]), given) in sets.iter().zip(answers_beside("certified", &texts, &specs)) {
        let case = case(&format!("f-strd-{name}"));
        // Printed digits of the certified values: 15.
        case.hold_recomputed("mean", given.at("readings/mean"), *mean);
        case.hold_recomputed("sd", given.at("readings/sd"), *sd);
        // Three readings are too few for the check of neighbours.
        if *name != "NumAcc1" {
            case.hold_recomputed("lag1", given.at("checks/serial correlation/statistic"), *lag);
        }
    }
}
