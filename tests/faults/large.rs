//! Faults that only a large file has: the files are made here, and are gone afterwards.

use super::faults_of;
use std::fs;
use std::io::{BufWriter, Write};

/// The codes shown here.
pub const CODES: [&str; 3] = ["record-too-long", "too-many-replicates", "too-many-singles"];

const SPEC: &str = "[review]
title = \"A large file (invented)\"
period = 2025
date = 2026-01-12
[quantity]
name = \"chloride\"
unit = \"mg/L\"
[[readings]]
file = \"readings.csv\"
value = \"value\"
[within]
from = \"stated\"
sd = 1.1
basis = \"invented\"
[prior]
from = \"flat\"
[[question]]
id = \"level\"
ask = \"level interval\"
";

/// The codes found wrong with a file that `write` fills, under keys added to its table.
fn codes(name: &str, keys: &str, write: &dyn Fn(&mut dyn Write) -> std::io::Result<()>) -> Vec<String> {
    let desk = std::env::temp_dir().join(format!("reassay-large-{}-{name}", std::process::id()));
    fs::create_dir_all(&desk).unwrap();
    let spec = SPEC.replace("value = \"value\"", &format!("value = \"value\"\n{keys}"));
    fs::write(desk.join("spec.toml"), spec).unwrap();
    let mut file = BufWriter::new(fs::File::create(desk.join("readings.csv")).unwrap());
    write(&mut file).unwrap();
    file.flush().unwrap();
    drop(file);
    let found = faults_of(&desk.join("spec.toml"));
    fs::remove_dir_all(&desk).unwrap();
    let Err(faults) = found else { return Vec::new() };
    for fault in &faults.0 {
        assert!(fault.place.is_some() && fault.repair.is_some(), "{fault:?}");
    }
    faults.0.into_iter().map(|fault| fault.code.to_string()).collect()
}

#[test]
fn a_row_of_more_than_a_million_bytes_is_refused() {
    let found = codes("row", "", &|file| {
        file.write_all(b"value,note\n41.2,\"")?;
        (0..60_000).try_for_each(|_| file.write_all(b"no end of this note\n"))?;
        file.write_all(b"\"\n")
    });
    assert_eq!(found, ["record-too-long"]);
}

#[test]
fn more_than_a_million_marked_readings_are_refused() {
    let found = codes("marks", "marks = { below = [\"<\"] }", &|file| {
        file.write_all(b"value\n")?;
        (0..1_000_001).try_for_each(|_| file.write_all(b"<1\n"))
    });
    assert_eq!(found, ["too-many-singles"]);
}

#[test]
fn more_than_two_million_rows_of_replicates_are_refused() {
    let found = codes("replicates", "replicates = \"batch\"", &|file| {
        file.write_all(b"value,batch\n")?;
        (0..1_000_000).try_for_each(|_| file.write_all(b"1,a\n2,b\n"))?;
        file.write_all(b"1,a\n")
    });
    assert_eq!(found, ["too-many-replicates"]);
}
