//! How fast readings are read: one pass that hashes and parses, beside plain hashing of the same
//! bytes in the same run. `cargo bench --bench reading -- [ROWS [FILE]]`; with FILE the table stays
//! there, for measurements with other programs.

use sha2::{Digest, Sha256};
use std::hint::black_box;
use std::io::{BufWriter, Read, Write};
use std::path::{Path, PathBuf};
use std::time::{Duration, Instant};

const SPEC: &str = "[review]\ntitle = \"Reading\"\nperiod = 2025\ndate = 2026-01-20\n\
    [quantity]\nname = \"level\"\nunit = \"mm\"\n\
    [[readings]]\nfile = \"FILE\"\nvalue = \"value\"\nperiod = \"year\"\nseries = \"station\"\ndate = \"day\"\n\
    [within]\nfrom = \"stated\"\nsd = 2.0\nbasis = \"invented\"\n[prior]\nfrom = \"flat\"\n\
    [[question]]\nid = \"q\"\nask = \"level interval\"\n\
    [report]\ninputs = \"hashed\"\ndetail = \"none\"\n";

fn main() {
    // `cargo bench` adds `--bench`; `cargo test --benches` runs the program too, on few rows.
    let words: Vec<String> = std::env::args().skip(1).filter(|word| !word.starts_with("--")).collect();
    let is_bench = std::env::args().any(|word| word == "--bench");
    let rows =
        words.first().and_then(|word| word.parse().ok()).unwrap_or(if is_bench { 2_000_000 } else { 2_000 });
    let folder = std::env::temp_dir().join(format!("reassay-reading-{}", std::process::id()));
    std::fs::create_dir_all(&folder).unwrap();
    let file = words.get(1).map_or_else(|| folder.join("rows.csv"), PathBuf::from);
    if words.get(1).is_none() || !file.exists() {
        write_rows(&file, rows);
    }
    let bytes = std::fs::metadata(&file).unwrap().len();

    let hashing = best(|| hash(&file));
    let plan = plan(&folder, &file);
    let reading = best(|| {
        let data = reassay::data::read(&plan).unwrap();
        assert_eq!(data.counts.used, rows);
        black_box(data);
    });
    let per_row = |time: Duration| time.as_secs_f64() * 1e9 / rows as f64;
    let speed = |time: Duration| bytes as f64 / time.as_secs_f64() / 1e9;
    println!("{rows} rows, {bytes} bytes");
    println!(
        "hashing alone     {:8.3} s  {:6.1} ns/row  {:5.2} GB/s",
        hashing.as_secs_f64(),
        per_row(hashing),
        speed(hashing)
    );
    println!(
        "hashing, reading  {:8.3} s  {:6.1} ns/row  {:5.2} GB/s",
        reading.as_secs_f64(),
        per_row(reading),
        speed(reading)
    );
    println!("ratio             {:8.2}", reading.as_secs_f64() / hashing.as_secs_f64());
    std::fs::remove_dir_all(&folder).unwrap();
}

/// The shortest of three runs.
fn best(mut run: impl FnMut()) -> Duration {
    let time = |_| {
        let start = Instant::now();
        run();
        start.elapsed()
    };
    (0..3).map(time).min().unwrap()
}

fn hash(file: &Path) {
    let mut file = std::fs::File::open(file).unwrap();
    let mut block = vec![0; 1 << 20];
    let mut state = Sha256::new();
    loop {
        match file.read(&mut block).unwrap() {
            0 => break,
            n => state.update(&block[..n]),
        }
    }
    black_box(state.finalize());
}

fn plan(folder: &Path, file: &Path) -> reassay::plan::Plan {
    let spec = folder.join("spec.toml");
    std::fs::write(&spec, SPEC.replace("FILE", &file.display().to_string())).unwrap();
    let read = |path: &Path| reassay::source::whole(path, "spec.toml", "reading the spec");
    reassay::plan::load(&spec, "spec.toml", &read).unwrap()
}

/// Invented readings: 40 stations, 11 years, in the order of their days.
fn write_rows(file: &Path, rows: u64) {
    let mut out = BufWriter::new(std::fs::File::create(file).unwrap());
    writeln!(out, "station,year,day,value").unwrap();
    let mut state: u64 = 2025;
    for row in 0..rows {
        state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
        let noise = (state >> 33) % 2000;
        let year = 2015 + row * 11 / rows;
        let (month, day) = (1 + row / 97 % 12, 1 + row / 13 % 28);
        writeln!(
            out,
            "ST-{:02},{year},{year}-{month:02}-{day:02},{}.{:02}",
            state >> 58 & 31,
            40 + noise / 100,
            noise % 100
        )
        .unwrap();
    }
    out.flush().unwrap();
}
