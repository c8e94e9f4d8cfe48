//! The whole stage: a spec and its files in, data or faults out.

use super::evidence::{Evidence, Seen};
use super::*;
use crate::diagnostics::{Fault, Faults, Outcome};
use crate::plan::{self, Plan};
use std::path::{Path, PathBuf};
use std::sync::atomic::{AtomicU32, Ordering};

/// A folder of its own for one test's files.
struct Folder(PathBuf);

impl Folder {
    fn new() -> Folder {
        static NUMBER: AtomicU32 = AtomicU32::new(0);
        let number = NUMBER.fetch_add(1, Ordering::Relaxed);
        let path = std::env::temp_dir().join(format!("reassay-data-{}-{number}", std::process::id()));
        std::fs::create_dir_all(&path).unwrap();
        Folder(path)
    }

    fn write(&self, name: &str, bytes: &[u8]) {
        std::fs::write(self.0.join(name), bytes).unwrap();
    }

    /// The plan of a spec whose [[readings]] and the like are given.
    fn plan(&self, tables: &str) -> Plan {
        self.plan_with("linear", "", tables)
    }

    fn plan_with(&self, scale: &str, review: &str, tables: &str) -> Plan {
        let spec = format!(
            "[review]\ntitle = \"T\"\nperiod = 2025\ndate = 2026-01-20\n{review}\n\
             [quantity]\nname = \"iron\"\nunit = \"mg/L\"\nscale = \"{scale}\"\n\
             [within]\nfrom = \"stated\"\n{}\nbasis = \"b\"\n[prior]\nfrom = \"flat\"\n\
             [[question]]\nid = \"q\"\nask = \"level interval\"\n{tables}",
            if scale == "log" { "log_sd = 0.2" } else { "sd = 1.0" }
        );
        self.write("spec.toml", spec.as_bytes());
        let read = |path: &Path| crate::source::whole(path, "spec.toml", "reading");
        plan::load(&self.0.join("spec.toml"), "spec.toml", &read)
            .unwrap_or_else(|faults| panic!("{faults:#?}"))
    }
}

impl Drop for Folder {
    fn drop(&mut self) {
        let _ = std::fs::remove_dir_all(&self.0);
    }
}

const SOURCE: &str =
    "[[readings]]\nfile = \"a.csv\"\nvalue = \"iron\"\nperiod = \"year\"\nseries = \"site\"\n";

fn read_csv(csv: &[u8], more: &str) -> Outcome<Data> {
    let folder = Folder::new();
    folder.write("a.csv", csv);
    read(&folder.plan(&format!("{SOURCE}{more}")))
}

fn fault_of(csv: &str, more: &str) -> Fault {
    let faults = read_csv(csv.as_bytes(), more).unwrap_err().0;
    assert_eq!(faults.len(), 1, "{faults:#?}");
    faults.into_iter().next().unwrap()
}

/// Code, line and column of the only fault.
fn placed(csv: &str, more: &str) -> (&'static str, u64, u64) {
    let fault = fault_of(csv, more);
    let place = fault.place.unwrap();
    (fault.code, place.line, place.column)
}

fn sums(data: &Data, series: &str, period: &str) -> (u64, f64, f64) {
    let series = data.series.iter().find(|known| known.name == series).unwrap();
    match series.period(&Period::new(period)).unwrap().evidence {
        Evidence::Sums { n, mean, ss: Some(ss), .. } => (n, mean, ss),
        ref other => panic!("{other:?}"),
    }
}

const ROWS: &str = "site,year,iron\nW,2024,1.0\nW,2025,2.0\nW,2025,4.0\nS,2025,5.5\n";

#[test]
fn readings_are_summed_per_series_and_period() {
    let data = read_csv(ROWS.as_bytes(), "").unwrap();
    assert_eq!(sums(&data, "W", "2025"), (2, 3.0, 2.0));
    assert_eq!(sums(&data, "S", "2025"), (1, 5.5, 0.0));
    assert_eq!(data.periods, [Period::new("2024"), Period::new("2025")]);
    assert_eq!(data.counts, RowCounts { read: 4, used: 4, ..RowCounts::default() });
    assert_eq!(data.files[0].sha256, crate::source::sha256_hex(ROWS.as_bytes()));
    assert_eq!(data.files[0].notes, ["delimiter \",\""]);
    let facts = &data.series[1].periods[1].facts;
    assert_eq!((facts.n, facts.mean, facts.smallest, facts.largest), (2, Some(3.0), Some(2.0), Some(4.0)));
    assert_eq!(facts.decimals, 1);
}

#[test]
fn the_same_table_in_other_dress_is_the_same_data() {
    let plain = read_csv(ROWS.as_bytes(), "").unwrap();
    let crlf = ROWS.replace('\n', "\r\n");
    let utf_16: Vec<u8> =
        std::iter::once(0xFEFF).chain(ROWS.encode_utf16()).flat_map(|unit| unit.to_le_bytes()).collect();
    let quoted = ROWS.replace("W,", "\"W\",").replace("2.0", "\"2.0\"");
    let dresses: Vec<(Vec<u8>, &str)> = vec![
        (crlf.into_bytes(), ""),
        (ROWS.replace('\n', "\r").into_bytes(), ""),
        ([b"\xEF\xBB\xBF", ROWS.as_bytes()].concat(), ""),
        (utf_16, ""),
        (quoted.into_bytes(), ""),
        (ROWS.replace(',', ";").replace('.', ",").into_bytes(), "decimal = \",\"\n"),
        (ROWS.replace(',', "\t").into_bytes(), ""),
        (format!("made by hand\n\n{ROWS}").into_bytes(), "skip = 2\n"),
        (format!("{ROWS}\n,,\n").into_bytes(), ""),
        (ROWS.replace("W,", " W ,").replace("2025", "2025.0").into_bytes(), ""),
        (ROWS.trim_end().as_bytes().to_vec(), ""),
        (ROWS.as_bytes().to_vec(), "encoding = \"windows-1252\"\n"),
    ];
    for (bytes, more) in dresses {
        let data = read_csv(&bytes, more).unwrap_or_else(|faults| panic!("{more} {faults:#?}"));
        assert_eq!(data.series.len(), plain.series.len());
        for (ours, theirs) in data.series.iter().zip(&plain.series) {
            assert_eq!(ours.name, theirs.name);
            for (ours, theirs) in ours.periods.iter().zip(&theirs.periods) {
                assert_eq!((&ours.evidence, &ours.facts), (&theirs.evidence, &theirs.facts));
            }
        }
    }
}

#[test]
fn a_cell_that_is_no_number_is_a_fault_at_its_place() {
    let with = |cell: &str| format!("site,year,iron\nW,2025,1.0\nW,2025,{cell}\n");
    for (cell, code) in [
        ("1.5 mg/L", "unit-in-cell"),
        ("nan", "not-finite"),
        ("#REF!", "spreadsheet-error"),
        ("\"1,234\"", "decimal-comma"),
        (">0.5", "undeclared-mark"),
        ("lost", "not-a-number"),
        ("1e999", "number-out-of-range"),
    ] {
        let marks = "marks = { below = [\"ND\"], above = [\"over\"] }\n";
        assert_eq!(placed(&with(cell), marks), (code, 3, 8), "{cell}");
    }
    // A comma where the comma separates shows in the number of cells.
    assert_eq!(placed(&with("1,5"), ""), ("ragged-row", 3, 1));
    assert_eq!(placed(&with("\"4\n5\""), ""), ("line-end-in-number", 3, 8));
}

#[test]
fn faults_of_the_whole_file_are_found_in_one_pass() {
    let csv = "site,year,iron\nW,2025,x\nW,,1.0\n,2025,1.0\nW,2025\nW,2025,1.0\n";
    let codes: Vec<&str> =
        read_csv(csv.as_bytes(), "").unwrap_err().0.iter().map(|fault| fault.code).collect();
    assert_eq!(codes, ["not-a-number", "missing-period", "missing-series", "ragged-row"]);
    let many = format!("site,year,iron\n{}", "W,2025,x\n".repeat(30));
    let faults = read_csv(many.as_bytes(), "").unwrap_err().0;
    assert_eq!(faults.len(), 21);
    assert_eq!(faults[20].message, "and 10 more like these");
}

#[test]
fn heads_that_do_not_fit_are_faults() {
    assert_eq!(fault_of("", "").code, "empty-file");
    assert_eq!(fault_of("site,year,iron\n", "").code, "no-rows");
    let fault = fault_of("site,year,Iron\nW,2025,1\n", "");
    assert_eq!((fault.code, fault.repair.as_deref()), ("no-such-column", Some("did you mean `Iron`?")));
    assert_eq!(fault.expected.as_deref(), Some("one of `site`, `year`, `Iron`"));
    assert_eq!(fault_of("site,year,iron,iron\nW,2025,1,1\n", "").code, "duplicate-column");
    assert_eq!(fault_of("site,year;x,iron;y\nW,2025;1,1;1\n", "").code, "unclear-delimiter");
    assert_eq!(fault_of("a\n", "skip = 5\n").code, "nothing-after-skip");
    assert_eq!(fault_of(ROWS, "where = { site = \"X\" }\n").code, "no-rows");
    assert_eq!(fault_of("PK\u{3}\u{4}\0\0,x\n", "").code, "not-text");
}

#[test]
fn text_in_another_encoding_is_refused_until_it_is_named() {
    let csv = b"site,year,iron\nM\xFCr,2025,1.0\n";
    let faults = read_csv(csv, "").unwrap_err().0;
    let place = faults[0].place.as_ref().unwrap();
    assert_eq!((faults[0].code, place.line, place.column), ("not-utf-8", 2, 2));
    let data = read_csv(csv, "encoding = \"windows-1252\"\n").unwrap();
    assert_eq!(data.series[0].name, "Mür");
}

#[test]
fn quotes_are_guarded() {
    assert_eq!(placed("site,year,iron\n\"W,2025,1.0\nW,2025,2.0\n", "").0, "unclosed-quote");
    let csv = "site,year,iron\n\"W\"x,2025,1.0\nW,2025,2.0\n";
    assert_eq!(placed(csv, ""), ("text-after-quote", 2, 4));
}

#[test]
fn missing_cells_are_counted_and_codes_refused() {
    let csv = "site,year,iron\nW,2025,\nW,2025,NA\nW,2025,1.0\nW,2025,1.4\n";
    let data = read_csv(csv.as_bytes(), "missing = [\"NA\"]\n").unwrap();
    assert_eq!((data.counts.missing, data.counts.used), (2, 2));
    assert_eq!(data.series[0].periods[0].facts.missing, 2);
    let csv = "site,year,iron\nW,2025,-999\nW,2025,1.0\nW,2025,1.4\n";
    assert_eq!(placed(csv, ""), ("missing-code", 2, 8));
    // Among such readings it is one of them.
    let csv = "site,year,iron\nW,2025,999\nW,2025,1003\nW,2025,995\n";
    assert!(read_csv(csv.as_bytes(), "").is_ok());
}

#[test]
fn dates_are_held_against_period_and_review() {
    let more = "date = \"sampled\"\n";
    let with = |date: &str| format!("site,year,iron,sampled\nW,2025,1.0,{date}\n");
    assert_eq!(placed(&with("2024-12-31"), more), ("date-outside-period", 2, 12));
    assert_eq!(placed(&with("2026-02-01"), more), ("future-date", 2, 12));
    assert_eq!(placed(&with("31.12.2025"), more), ("not-a-date", 2, 12));
    assert_eq!(placed(&with("2025-02-29"), more), ("not-a-date", 2, 12));
    assert_eq!(placed(&with(""), more), ("missing-date", 2, 12));
    let data = read_csv(with("2025-03-31").as_bytes(), more).unwrap();
    assert_eq!(data.series[0].periods[0].facts.by_month[2], 1);
}

#[test]
fn the_year_of_the_date_may_start_later() {
    let folder = Folder::new();
    folder.write("a.csv", b"day,iron\n30.9.2024,1\n1.10.2024,2\n3.4.2025,4\n");
    let plan = folder.plan(
        "[[readings]]\nfile = \"a.csv\"\nvalue = \"iron\"\ndate = \"day\"\ndate_order = \"d.m.y\"\nyear_starts = \"10-01\"\n",
    );
    let data = read(&plan).unwrap();
    assert_eq!(data.periods, [Period::new("2023/24"), Period::new("2024/25")]);
    assert_eq!(sums(&data, "iron", "2024/25"), (2, 3.0, 2.0));
}

#[test]
fn a_row_read_twice_is_named_with_its_first_place() {
    let csv = "id,site,year,iron\nA,W,2025,1.0\nA,W,2024,1.0\nA,W,2025,2.0\n";
    let fault = fault_of(csv, "id = \"id\"\n");
    assert_eq!(fault.code, "row-twice");
    assert_eq!(fault.message, "\"A\" is read twice for W, 2025: first at a.csv:2, and again here");
}

#[test]
fn a_file_read_twice_is_refused_unless_rows_are_kept_apart() {
    let folder = Folder::new();
    folder.write("a.csv", ROWS.as_bytes());
    folder.write("b.csv", ROWS.as_bytes());
    let twice = folder.plan(&format!("{SOURCE}{}", SOURCE.replace("a.csv", "b.csv")));
    assert_eq!(read(&twice).unwrap_err().0[0].code, "file-twice");
    let apart =
        folder.plan(&format!("{SOURCE}where = {{ site = \"W\" }}\n{SOURCE}where = {{ site = \"S\" }}\n"));
    let data = read(&apart).unwrap();
    assert_eq!((data.files.len(), data.counts.used, data.counts.other), (1, 4, 4));
}

#[test]
fn other_units_are_refused() {
    let csv = "site,year,iron,u\nW,2025,1.0,mg/L\nW,2025,1.0,ug/L\n";
    assert_eq!(placed(csv, "unit = \"u\"\n"), ("other-unit", 3, 12));
}

const EXCLUDE: &str = "reason = \"r\"\nby = \"b\"\non = 2025-05-01\n";

#[test]
fn exclusions_take_exactly_their_rows_and_can_be_restored() {
    let exclude = format!("[[exclude]]\nwhere = {{ site = \"W\", iron = \"4.0\" }}\n{EXCLUDE}");
    let data = read_csv(ROWS.as_bytes(), &exclude).unwrap();
    assert_eq!(sums(&data, "W", "2025"), (1, 2.0, 0.0));
    let period = &data.series[1].periods[1];
    assert_eq!(period.restored, Some(Evidence::Sums { n: 2, mean: 3.0, ss: Some(2.0), rest: 0.0 }));
    assert_eq!(data.excluded_rows[0][0].text, "4.0");
    assert_eq!(data.series[1].periods[0].restored, None);

    let too_many = format!("[[exclude]]\nwhere = {{ site = \"W\" }}\n{EXCLUDE}");
    let fault = fault_of(ROWS, &too_many);
    assert_eq!(fault.code, "exclusion-count");
    assert_eq!(fault.message, "this exclusion matches 3 rows (a.csv:2, a.csv:3, a.csv:4)");
    let unknown = format!("[[exclude]]\nwhere = {{ sites = \"W\" }}\n{EXCLUDE}");
    let fault = fault_of(ROWS, &unknown);
    assert_eq!((fault.code, fault.repair.as_deref()), ("no-such-column", Some("did you mean `site`?")));
}

#[test]
fn an_exclusion_knows_dates_in_the_files_order() {
    let csv = "site,year,iron,day\nW,2025,1.0,4.3.2025\nW,2025,2.0,5.3.2025\n";
    let more = format!(
        "date = \"day\"\ndate_order = \"d.m.y\"\n[[exclude]]\nwhere = {{ day = 2025-03-04 }}\n{EXCLUDE}"
    );
    assert_eq!(sums(&read_csv(csv.as_bytes(), &more).unwrap(), "W", "2025"), (1, 2.0, 0.0));
}

#[test]
fn replicates_are_averaged_first() {
    let csv = "site,year,iron,batch\nW,2025,1.0,A\nW,2025,2.0,A\nW,2025,5.0,B\nW,2025,8.5,C\nW,2025,1.5,C\n";
    let exclude = format!("[[exclude]]\nwhere = {{ iron = \"8.5\" }}\n{EXCLUDE}");
    let data = read_csv(csv.as_bytes(), &format!("replicates = \"batch\"\n{exclude}")).unwrap();
    let (n, mean, _) = sums(&data, "W", "2025");
    assert_eq!((n, mean), (3, (1.5 + 5.0 + 1.5) / 3.0));
    let period = &data.series[0].periods[0];
    assert_eq!(period.facts.n, 3);
    match period.restored {
        Some(Evidence::Sums { n, mean, .. }) => assert_eq!((n, mean), (3, (1.5 + 5.0 + 5.0) / 3.0)),
        ref other => panic!("{other:?}"),
    }
}

#[test]
fn values_in_the_spec_pass_the_same_screen() {
    let folder = Folder::new();
    let data = read(&folder.plan("[[readings]]\nvalues = [1.0, 2.50, 4]\n")).unwrap();
    assert_eq!(sums(&data, "iron", "2025"), (3, 2.5, 4.5));
    assert_eq!(data.series[0].periods[0].facts.decimals, 2);
    let faults = read(&folder.plan("[[readings]]\nvalues = [1.0, \"lost\"]\n")).unwrap_err().0;
    assert_eq!(faults[0].code, "not-a-number");
    assert_eq!(faults[0].place.as_ref().unwrap().file, "spec.toml");
}

#[test]
fn nothing_below_zero_enters_a_log_scale() {
    let folder = Folder::new();
    folder.write("a.csv", b"site,year,iron\nW,2025,1.0\nW,2025,0\nW,2025,-1\n");
    let faults = read(&folder.plan_with("log", "", SOURCE)).unwrap_err().0;
    assert_eq!(faults.len(), 2);
    assert!(faults.iter().all(|fault| fault.code == "not-above-zero"));
    folder.write("a.csv", b"site,year,iron\nW,2025,1.0\nW,2025,100\n");
    let data = read(&folder.plan_with("log", "", SOURCE)).unwrap();
    // ln 100 / 2 and (ln 100)² / 2, from 30 digits of ln 100.
    let (n, mean, ss) = sums(&data, "W", "2025");
    assert_eq!(n, 2);
    assert!((mean - std::f64::consts::LN_10).abs() < 1e-15);
    assert!((ss - 10.603796220956796).abs() < 1e-13);
    assert_eq!(data.series[0].periods[0].facts.mean, Some(50.5));
}

#[test]
fn own_uncertainties_are_kept_with_their_readings() {
    let csv = "site,year,iron,u,k\nW,2025,1.0,0.4,2\nW,2025,2.0,0.3,3\n";
    let more = "uncertainty = \"u\"\ncoverage_factor = \"k\"\n";
    let data = read_csv(csv.as_bytes(), more).unwrap();
    match &data.series[0].periods[0].evidence {
        Evidence::Singles(singles) => {
            assert_eq!(singles[0], evidence::Single { seen: Seen::At(1.0), uncertainty: 0.2 });
            assert_eq!(singles[1].uncertainty, 0.3 / 3.0);
        }
        other => panic!("{other:?}"),
    }
    let csv = "site,year,iron,u,k\nW,2025,1.0,,2\n";
    assert_eq!(placed(csv, more), ("not-an-uncertainty", 2, 12));
    let csv = "site,year,iron,u,k\nW,2025,1.0,0.2,0\n";
    assert_eq!(placed(csv, more), ("not-an-uncertainty", 2, 16));
}

#[test]
fn an_interim_review_counts_later_readings_and_does_not_use_them() {
    let folder = Folder::new();
    folder.write("a.csv", b"site,year,iron,day\nW,2025,1.0,2025-03-04\nW,2025,2.0,2025-09-05\n");
    let review = "status = \"interim\"\nuntil = 2025-06-30";
    let data = read(&folder.plan_with("linear", review, &format!("{SOURCE}date = \"day\"\n"))).unwrap();
    assert_eq!((data.counts.used, data.counts.later), (1, 1));
    let faults = read(&folder.plan_with("linear", review, SOURCE)).unwrap_err().0;
    assert_eq!(faults[0].code, "until-without-date");
}

#[test]
fn summaries_come_onto_the_models_scale() {
    let folder = Folder::new();
    let rows = "[[summaries]]\nrows = [ { period = 2023, n = 5, mean = 4.0, sd = 0.5 }, \
                { period = 2024, mean = 4.2, uncertainty = 0.1 }, { period = 2022, n = 1, mean = 4.1 } ]\n";
    let values = "[[readings]]\nvalues = [1.0]\n";
    let data = read(&folder.plan(&format!("{values}{rows}"))).unwrap();
    let evidence: Vec<&Evidence> = data.series[0].periods.iter().map(|period| &period.evidence).collect();
    assert_eq!(*evidence[0], Evidence::Sums { n: 1, mean: 4.1, ss: Some(0.0), rest: 0.0 });
    assert_eq!(*evidence[1], Evidence::Sums { n: 5, mean: 4.0, ss: Some(1.0), rest: 0.0 });
    assert_eq!(*evidence[2], Evidence::Mean { mean: 4.2, uncertainty: 0.1 });
    assert!(data.series[0].periods[1].facts.from_summary);

    let both =
        format!("{values}[[summaries]]\nrows = [ {{ period = 2025, n = 5, mean = 4.0, sd = 0.5 }} ]\n");
    assert_eq!(read(&folder.plan(&both)).unwrap_err().0[0].code, "readings-and-summary");
}

#[test]
fn summaries_from_a_file_are_screened() {
    let folder = Folder::new();
    let source = "[[summaries]]\nfile = \"s.csv\"\nperiod = \"year\"\nseries = \"site\"\nn = \"n\"\nmean = \"mean\"\nsd = \"sd\"\n";
    folder.write("s.csv", b"site,year,n,mean,sd\nW,2023,5,4.0,0.5\nW,2024,3,4.5,\n");
    let data = read(&folder.plan(source)).unwrap();
    assert_eq!(sums(&data, "W", "2023"), (5, 4.0, 1.0));
    assert_eq!(data.series[0].periods[1].evidence, Evidence::Sums { n: 3, mean: 4.5, ss: None, rest: 0.0 });
    folder.write(
        "s.csv",
        b"site,year,n,mean,sd\nW,2023,5,4.0,0.5\nW,2023,2.5,4.0,0.5\nW,2024,5,x,1\nW,2023,5,4,1\n",
    );
    let codes: Vec<&str> = read(&folder.plan(source)).unwrap_err().0.iter().map(|fault| fault.code).collect();
    assert_eq!(codes, ["wrong-summary", "not-a-number", "summary-twice"]);
}

#[test]
fn periods_without_an_order_ask_for_one() {
    let csv = "site,year,iron\nW,spring,1.0\nW,autumn,2.0\n";
    assert_eq!(fault_of(csv, "").code, "unordered-periods");
    let data = read_csv(csv.as_bytes(), "[history]\norder = [\"spring\", \"autumn\"]\n").unwrap();
    assert_eq!(data.periods[0].as_str(), "spring");
    let dated = "site,year,iron,day\nW,B,1.0,2024-01-01\nW,A,2.0,2025-01-01\n";
    let data = read_csv(dated.as_bytes(), "date = \"day\"\n").unwrap();
    assert_eq!(data.periods[0].as_str(), "B");
}

#[test]
fn a_pinned_file_that_differs_is_refused_and_line_ends_are_told_apart() {
    let folder = Folder::new();
    folder.write("a.csv", ROWS.replace('\n', "\r\n").as_bytes());
    let pin = crate::source::sha256_hex(ROWS.as_bytes());
    let faults = read(&folder.plan(&format!("{SOURCE}sha256 = \"{pin}\"\n"))).unwrap_err().0;
    assert_eq!(faults[0].code, "hash-differs");
    assert!(faults[0].repair.as_ref().unwrap().starts_with("only the line ends differ"));
}

#[test]
fn a_missing_file_does_not_hide_other_faults() {
    let folder = Folder::new();
    folder.write("b.csv", b"site,year,iron\nW,2025,x\n");
    let plan = folder.plan(&format!("{SOURCE}{}", SOURCE.replace("a.csv", "b.csv")));
    let codes: Vec<&str> = read(&plan).unwrap_err().0.iter().map(|fault| fault.code).collect();
    assert_eq!(codes, ["unreadable-file", "not-a-number"]);
}

#[test]
fn readings_csv_lists_every_row_with_its_fate() {
    let csv = "id,site,year,iron\nA,W,2025,1.0\n\"B,\"\"1\"\"\",W,2025,\nC,W,2025,2.50\n";
    let folder = Folder::new();
    folder.write("a.csv", csv.as_bytes());
    let exclude =
        format!("[[exclude]]\nwhere = {{ id = \"C\" }}\n{}", EXCLUDE.replace("\"r\"", "\"torn, wet\""));
    let plan = folder.plan(&format!("{SOURCE}id = \"id\"\n{exclude}"));
    let data = read(&plan).unwrap();
    assert_eq!(
        rows_csv(&data, &plan),
        "series,period,row,text,value,mark,used,reason\n\
         W,2025,A,1.0,1,,yes,\n\
         W,2025,\"B,\"\"1\"\"\",,,,no,no reading\n\
         W,2025,C,2.50,2.5,,no,\"excluded by b, 2025-05-01: torn, wet\"\n"
    );
}

mod laws {
    use super::*;
    use crate::data::delimited::Parser;
    use crate::data::fault_list::FaultList;
    use crate::data::gather::Gather;
    use crate::data::screen::Screen;
    use proptest::prelude::*;

    /// What a file gives when its bytes come in these blocks: the rows as kept, or the faults.
    fn in_blocks(plan: &Plan, bytes: &[u8], blocks: &[usize]) -> (String, Faults) {
        let mut faults = FaultList::default();
        let mut gather = Gather::new(plan);
        let source = &plan.sources[0];
        let notes = {
            let gather = &mut gather;
            let mut parser = Parser::new(source.into(), "a.csv", &mut faults, |head, faults| {
                Screen::new(head, source, plan, gather, 0, faults)
            });
            let mut rest = bytes;
            let mut sizes = blocks.iter().cycle();
            while !rest.is_empty() {
                let (block, after) = rest.split_at((*sizes.next().unwrap()).clamp(1, rest.len()));
                parser.feed(block);
                rest = after;
            }
            parser.end().0
        };
        let rows: Vec<String> = gather.cells.iter().map(|cell| format!("{cell:?}")).collect();
        (format!("{notes:?} {rows:?} {:?}", gather.counts), faults.into_faults())
    }

    fn plan_of(more: &str) -> Plan {
        Folder::new().plan(&format!("{SOURCE}{more}"))
    }

    proptest! {
        #![proptest_config(ProptestConfig { cases: 400, ..ProptestConfig::default() })]

        /// Any file, cut into any blocks, gives the same rows and the same faults.
        #[test]
        fn blocks_do_not_show(
            lines in prop::collection::vec("[WS\"]{0,3},(2025|\"20\n25\"|é)?,[0-9x.\"]{0,4}", 0..30),
            end in "(\n|\r\n|\r)",
            blocks in prop::collection::vec(1usize..40, 1..6),
        ) {
            let text = format!("site,year,iron{end}{}", lines.join(&end));
            let plan = plan_of("delimiter = \",\"\n");
            let whole = in_blocks(&plan, text.as_bytes(), &[usize::MAX]);
            prop_assert_eq!(in_blocks(&plan, text.as_bytes(), &blocks), whole);
        }

        /// No bytes make the reader panic.
        #[test]
        fn no_bytes_panic(
            head in prop::bool::ANY,
            bytes in prop::collection::vec(prop_oneof![any::<u8>(), prop::sample::select(b",\"\n\r;\t123.".to_vec())], 0..300),
            more in prop::sample::select(vec!["", "encoding = \"utf-16le\"\n", "encoding = \"shift_jis\"\n", "skip = 1\n", "decimal = \",\"\n", "delimiter = \";\"\n"]),
        ) {
            let text = if head { [b"site,year,iron\n".as_slice(), &bytes].concat() } else { bytes };
            let plan = plan_of(more);
            let whole = in_blocks(&plan, &text, &[usize::MAX]);
            prop_assert_eq!(in_blocks(&plan, &text, &[7, 1, 20]), whole);
        }

        /// The order of the rows shows in no sum.
        #[test]
        fn shuffled_rows_give_identical_evidence(
            values in prop::collection::vec((prop::sample::select(vec!["W", "S"]), -1e9f64..1e9), 1..200)
                .prop_flat_map(|rows| (Just(rows.clone()), Just(rows).prop_shuffle())),
        ) {
            let csv = |rows: &[(&str, f64)]| {
                let lines: Vec<String> = rows.iter().map(|(site, x)| format!("{site},2025,{x}\n")).collect();
                format!("site,year,iron\n{}", lines.concat())
            };
            let (first, second) = values;
            let data = [first, second].map(|rows| read_csv(csv(&rows).as_bytes(), "").unwrap());
            for (ours, theirs) in data[0].series.iter().zip(&data[1].series) {
                prop_assert_eq!(&ours.periods[0].evidence, &theirs.periods[0].evidence);
                prop_assert_eq!(&ours.periods[0].facts, &theirs.periods[0].facts);
            }
        }
    }
}
