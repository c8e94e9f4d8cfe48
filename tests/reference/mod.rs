//! Every promise of `reassay::math::promises` against the high-precision tables of this folder (see its README).

mod posterior;
mod posterior_marked;
mod posterior_marked_histories;
mod strd;

use std::fs;
use std::path::{Path, PathBuf};

use reassay::math::promises::{Measure, PROMISES, Promise, SMALLEST};
use reassay::math::{
    beta, chi_square, f_law, fm, gamma, inverse_gamma, mixture, noncentral_t, normal, owens_t, student,
};

type Outcome = Result<f64, String>;

/// The function of a table at one row's parameters.
fn compute(function: &str, v: &[f64]) -> Outcome {
    let said = |r: reassay::math::error::Result<f64>| r.map_err(|e| e.to_string());
    match function {
        "exp" => Ok(fm::exp(v[0])),
        "normal_cdf" => Ok(normal::cdf(v[0])),
        "normal_sf" => Ok(normal::sf(v[0])),
        "normal_logcdf" => Ok(normal::ln_cdf(v[0])),
        "normal_logsf" => Ok(normal::ln_sf(v[0])),
        "normal_ppf" => said(normal::quantile(v[0])),
        // A log-normal variable is the exponential of a normal one: the mixture of one part on the log scale.
        "lognormal_cdf" => said(mixture::NormalMixture::single(v[0], v[1]).map(|m| m.cdf(fm::ln(v[2])))),
        "lognormal_sf" => said(mixture::NormalMixture::single(v[0], v[1]).map(|m| m.sf(fm::ln(v[2])))),
        "lognormal_ppf" => {
            said(mixture::NormalMixture::single(v[0], v[1]).and_then(|m| m.quantile(v[2])).map(fm::exp))
        }
        "t_cdf" => said(student::cdf(v[1], v[0])),
        "t_sf" => said(student::sf(v[1], v[0])),
        "t_ppf" => said(student::quantile(v[1], v[0])),
        "t_logpdf" => said(student::ln_pdf(v[1], v[0])),
        "chi2_cdf" => said(chi_square::cdf(v[1], v[0])),
        "chi2_sf" => said(chi_square::sf(v[1], v[0])),
        "chi2_ppf" => said(chi_square::quantile(v[1], v[0])),
        "chi2_isf" => said(chi_square::upper_quantile(v[1], v[0])),
        "gamma_p" => said(gamma::p(v[0], v[1])),
        "gamma_q" => said(gamma::q(v[0], v[1])),
        "gamma_ppf" => said(gamma::quantile(v[0], v[1])),
        "invgamma_cdf" => said(inverse_gamma::cdf(v[2], v[0], v[1])),
        "invgamma_sf" => said(inverse_gamma::sf(v[2], v[0], v[1])),
        "invgamma_ppf" => said(inverse_gamma::quantile(v[2], v[0], v[1])),
        "beta_cdf" => said(beta::cdf(v[0], v[1], v[2], 1.0 - v[2])),
        "beta_sf" => said(beta::sf(v[0], v[1], v[2], 1.0 - v[2])),
        "beta_ppf" => said(beta::quantile(v[0], v[1], v[2]).map(|pair| pair.0)),
        "lbeta" => said(beta::ln_beta(v[0], v[1])),
        "lgamma" => Ok(fm::ln_gamma(v[0])),
        "digamma" => said(gamma::digamma(v[0])),
        "trigamma" => said(gamma::trigamma(v[0])),
        "nct_cdf" => said(noncentral_t::cdf(v[2], v[0], v[1])),
        "nct_sf" => said(noncentral_t::sf(v[2], v[0], v[1])),
        "owens_t" => said(owens_t::owens_t(v[0], v[1])),
        "f_cdf" => said(f_law::cdf(v[2], v[0], v[1])),
        "f_sf" => said(f_law::sf(v[2], v[0], v[1])),
        other => Err(format!("no function for the table {other}")),
    }
}

fn tables() -> Vec<PathBuf> {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/reference");
    let mut found: Vec<PathBuf> = fs::read_dir(folder)
        .unwrap()
        .map(|entry| entry.unwrap().path())
        .filter(|path| path.extension().is_some_and(|e| e == "csv"))
        // The tables of posteriors have a test of their own.
        .filter(|path| !path.file_name().is_some_and(|name| name.to_string_lossy().starts_with("posterior")))
        .collect();
    found.sort();
    found
}

struct Row {
    function: String,
    parameters: Vec<f64>,
    reference: f64,
}

/// `function,parameter,…,value`; the first line is a header.
fn rows(path: &Path) -> Vec<Row> {
    let text = fs::read_to_string(path).unwrap();
    text.lines()
        .skip(1)
        .filter(|line| !line.is_empty())
        .map(|line| {
            let fields: Vec<&str> = line.split(',').collect();
            let numbers: Vec<f64> = fields[1..].iter().map(|f| f.parse().unwrap()).collect();
            let (reference, parameters) = numbers.split_last().unwrap();
            Row { function: fields[0].to_string(), parameters: parameters.to_vec(), reference: *reference }
        })
        .collect()
}

fn promise_for(row: &Row) -> Option<&'static Promise> {
    PROMISES.iter().find(|p| p.function == row.function && row.parameters[0].abs() <= p.up_to)
}

fn error_of(measure: Measure, value: f64, reference: f64) -> f64 {
    if value == reference {
        return 0.0;
    }
    let scale = match measure {
        Measure::Relative => reference.abs(),
        Measure::Mixed => reference.abs().max(1.0),
    };
    let error = (value - reference).abs() / scale;
    if error.is_nan() { f64::INFINITY } else { error }
}

#[test]
fn every_promise_holds_on_every_reference_value() {
    let mut faults = Vec::new();
    let mut walked = Vec::new();
    for path in tables() {
        let mut worst: Vec<(&'static Promise, f64, Vec<f64>, usize)> = Vec::new();
        for row in rows(&path) {
            let Some(promise) = promise_for(&row) else {
                faults.push(format!("{}{:?}: no promise", row.function, row.parameters));
                continue;
            };
            if row.reference.abs() < SMALLEST {
                continue;
            }
            let error = match compute(&row.function, &row.parameters) {
                Ok(value) => error_of(promise.measure, value, row.reference),
                Err(said) => {
                    faults.push(format!("{}{:?}: {said}", row.function, row.parameters));
                    continue;
                }
            };
            if error > promise.bound {
                faults.push(format!(
                    "{}{:?}: error {error:e} above {:e}",
                    row.function, row.parameters, promise.bound
                ));
            }
            match worst.iter_mut().find(|w| w.0 == promise) {
                Some(entry) => {
                    entry.3 += 1;
                    if error > entry.1 {
                        (entry.1, entry.2) = (error, row.parameters);
                    }
                }
                None => worst.push((promise, error, row.parameters, 1)),
            }
        }
        for (promise, error, parameters, count) in worst {
            println!(
                "{:14} up to {:7.0e}: worst {error:8.1e} of {:8.1e} promised, {count:4} values, at {parameters:?}",
                promise.function, promise.up_to, promise.bound
            );
            walked.push(promise);
        }
    }
    for promise in PROMISES {
        if !walked.contains(&promise) {
            faults.push(format!("{} up to {:e}: promised but not tested", promise.function, promise.up_to));
        }
    }
    assert!(faults.is_empty(), "{} faults:\n{}", faults.len(), faults.join("\n"));
}
