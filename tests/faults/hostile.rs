//! Whatever bytes are handed in as a spec: a plan or a message, never a panic. The mutations start from
//! the example specs, so that they get past the first check.

use proptest::prelude::*;
use proptest::test_runner::{Config, RngSeed};
use reassay::diagnostics::Fault;
use reassay::diagnostics::render::{Look, render};
use reassay::plan;
use std::fs;
use std::path::Path;

/// Reads a spec from memory and uses what comes of it.
fn digest(bytes: &[u8]) {
    let no_base = |path: &Path| match path.file_name() {
        Some(name) if name == "spec.toml" => Ok(bytes.to_vec()),
        _ => Err(Fault::unreadable("unreadable-file", "there is no such file")),
    };
    match plan::load(Path::new("spec.toml"), "spec.toml", &no_base) {
        Ok(plan) => {
            plan::plan_toml(&plan, &[]);
            for name in plan.series.keys() {
                plan.prior_table(name);
                plan.within_table(name);
            }
            for alternative in &plan.alternatives {
                plan.under(alternative);
            }
        }
        Err(faults) => {
            assert!(!faults.is_empty());
            for look in [Look::default(), Look { colour: true, width: 1 }] {
                render(&faults, look);
            }
        }
    }
}

fn examples() -> Vec<Vec<u8>> {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("specs");
    let mut paths: Vec<_> = fs::read_dir(folder).unwrap().map(|entry| entry.unwrap().path()).collect();
    paths.retain(|path| path.extension().is_some_and(|ending| ending == "toml"));
    paths.sort();
    paths.iter().map(|path| fs::read(path).unwrap()).collect()
}

/// One slip of the hand, or worse.
#[derive(Debug, Clone)]
enum Slip {
    Remove(usize, usize),
    Insert(usize, &'static str),
    Byte(usize, u8),
    Swap(usize, usize),
    Repeat(usize, usize),
}

const SCRAPS: &[&str] = &[
    "=",
    "[",
    "]",
    "{",
    "}",
    "\"",
    "'",
    "\n",
    ",",
    ".",
    "#",
    "[[",
    "µ",
    "\u{202e}",
    "-",
    "1e999",
    "nan",
    "inf",
    "95",
    "0",
    "\"\"",
    "true",
    "2026-02-30",
    "[limit.x]\n",
    "[prior]\n",
    "[series.\"\"]\n",
    "from = \"stated\"\n",
    "\\",
];

fn slip() -> impl Strategy<Value = Slip> {
    prop_oneof![
        (any::<usize>(), 1..40usize).prop_map(|(at, length)| Slip::Remove(at, length)),
        (any::<usize>(), proptest::sample::select(SCRAPS)).prop_map(|(at, scrap)| Slip::Insert(at, scrap)),
        (any::<usize>(), any::<u8>()).prop_map(|(at, byte)| Slip::Byte(at, byte)),
        (any::<usize>(), any::<usize>()).prop_map(|(a, b)| Slip::Swap(a, b)),
        (any::<usize>(), 1..80usize).prop_map(|(at, length)| Slip::Repeat(at, length)),
    ]
}

fn with_slips(mut bytes: Vec<u8>, slips: &[Slip]) -> Vec<u8> {
    for slip in slips {
        let size = bytes.len().max(1);
        match *slip {
            Slip::Remove(at, length) => {
                let from = (at % size).min(bytes.len());
                bytes.drain(from..(from + length).min(bytes.len()));
            }
            Slip::Insert(at, scrap) => {
                let from = (at % size).min(bytes.len());
                bytes.splice(from..from, scrap.bytes());
            }
            Slip::Byte(at, byte) => {
                if let Some(place) = bytes.get_mut(at % size) {
                    *place = byte;
                }
            }
            Slip::Swap(a, b) => {
                // Two lines change places: keys wander into other tables.
                let mut lines: Vec<&[u8]> = bytes.split(|byte| *byte == b'\n').collect();
                let count = lines.len();
                lines.swap(a % count, b % count);
                bytes = lines.join(&b'\n');
            }
            Slip::Repeat(at, length) => {
                let from = (at % size).min(bytes.len());
                let piece = bytes[from..(from + length).min(bytes.len())].to_vec();
                bytes.splice(from..from, piece);
            }
        }
    }
    bytes
}

fn config() -> Config {
    Config {
        cases: 2000,
        rng_seed: RngSeed::Fixed(20_260_112),
        failure_persistence: None,
        ..Config::default()
    }
}

proptest! {
    #![proptest_config(config())]

    #[test]
    fn random_bytes_never_panic(bytes in proptest::collection::vec(any::<u8>(), 0..400)) {
        digest(&bytes);
    }

    #[test]
    fn specs_with_slips_never_panic(at in any::<usize>(), slips in proptest::collection::vec(slip(), 1..8)) {
        let examples = examples();
        digest(&with_slips(examples[at % examples.len()].clone(), &slips));
    }
}
