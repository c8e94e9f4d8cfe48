//! The chain of reviews: a prior carried over two years equals the history computed afresh from all readings
//! (methods, carried), and the ledger lets no reading in twice. The data are invented.

use serde_json::Value;
use std::fs;
use std::path::{Path, PathBuf};
use std::process::Command;

struct Desk(PathBuf);

impl Drop for Desk {
    fn drop(&mut self) {
        let _ = fs::remove_dir_all(&self.0);
    }
}

impl Desk {
    fn new(name: &str) -> Desk {
        let desk = std::env::temp_dir().join(format!("reassay-chain-{}-{name}", std::process::id()));
        fs::create_dir_all(&desk).unwrap();
        Desk(desk)
    }

    /// Runs a command of the program; status, and what it said on both streams.
    fn run(&self, arguments: &[&str]) -> (i32, String) {
        let output = Command::new(env!("CARGO_BIN_EXE_reassay"))
            .args(arguments)
            .current_dir(&self.0)
            .output()
            .unwrap();
        let said = [output.stdout, output.stderr].concat();
        (output.status.code().unwrap(), String::from_utf8(said).unwrap())
    }

    fn report(&self, id: &str, spec: &str) -> (i32, String) {
        fs::write(self.0.join(format!("{id}.toml")), spec).unwrap();
        self.run(&["report", &format!("{id}.toml"), "--quiet"])
    }

    fn answers(&self, id: &str) -> Value {
        let path = self.0.join("reviews").join(id).join("answers.json");
        serde_json::from_slice(&fs::read(path).unwrap()).unwrap()
    }
}

/// Series, their `[series]` tables for history and for carried, on the linear scale.
const LINEAR: &[(&str, &str, &str)] = &[
    ("uniform", "prior = { from = \"history\" }", ""),
    (
        "half-normal",
        "prior = { from = \"history\", between = \"half-normal\", between_scale = 1.5, basis = \"made up\" }",
        "",
    ),
    (
        "half-cauchy",
        "prior = { from = \"history\", between = \"half-cauchy\", between_scale = 1.5, basis = \"made up\" }",
        "",
    ),
    ("known", "prior = { from = \"history\", between_sd = 0.9, basis = \"made up\" }", ""),
    ("none", "prior = { from = \"history\", between = \"none\" }", ""),
    (
        "walk",
        "prior = { from = \"history\", pattern = \"random walk\", between = \"half-normal\", between_scale = 1.5, basis = \"made up\" }",
        "",
    ),
    (
        "worth",
        "prior = { from = \"history\", between_sd = 0.9, basis = \"made up\" }\nwithin = { from = \"stated\", sd = 1.2, df = 9, basis = \"made up\" }",
        "within = { from = \"carried\" }",
    ),
    (
        "pooled",
        "prior = { from = \"history\", between_sd = 0.9, basis = \"made up\" }\nwithin = { from = \"history\" }",
        "within = { from = \"carried\" }",
    ),
];

/// Readings of a series in a year: unequal numbers, no two alike.
fn readings(series: usize, year: u32) -> Vec<f64> {
    let count = 3 + (year as usize + series) % 3;
    let level = 20.0 + f64::from((year * 7 + 3) % 5) * 0.6 + series as f64 * 0.3;
    let scatter =
        |i: usize| f64::from(((i * 37 + series * 11 + year as usize * 13) % 23) as u32) / 10.0 - 1.1;
    (0..count).map(|i| ((level + scatter(i)) * 100.0).round() / 100.0).collect()
}

fn csv(years: std::ops::RangeInclusive<u32>, names: &[&str]) -> String {
    let mut text = String::from("series,year,value\n");
    for (place, name) in names.iter().enumerate() {
        for year in years.clone() {
            for (i, value) in readings(place, year).into_iter().enumerate() {
                let mark = if *name == "marked" && i == 1 { "<" } else { "" };
                text.push_str(&format!("{name},{year},{mark}{value}\n"));
            }
        }
    }
    text
}

fn spec(id: &str, year: u32, file: &str, prior: &str, own: &[(&str, String)]) -> String {
    let previous = match prior {
        "carried" => format!("previous = {{ review = \"reviews/carried-{}\" }}", year - 1),
        _ => String::new(),
    };
    let mut text = format!(
        "[review]\ntitle = \"Chain\"\nid = \"{id}\"\nperiod = {year}\ndate = 2026-02-01\nstatus = \"final\"\n{previous}\n\
         [quantity]\nname = \"chloride\"\nunit = \"mg/L\"\n\
         [[readings]]\nfile = \"{file}\"\nvalue = \"value\"\nperiod = \"year\"\nseries = \"series\"\nmarks = {{ below = [\"<\"] }}\n\
         [within]\nfrom = \"stated\"\nsd = 1.1\nbasis = \"made up\"\n\
         [prior]\nfrom = \"{prior}\"\n\
         [[question]]\nid = \"level\"\nask = \"level interval\"\n\
         [[question]]\nid = \"next\"\nask = \"reading interval\"\nof_period = \"next\"\n\
         [[question]]\nid = \"over\"\nask = \"level chance\"\nabove = 22.5\n\
         [[question]]\nid = \"moved\"\nask = \"change\"\n"
    );
    for (name, table) in own {
        text.push_str(&format!("[series.\"{name}\"]\n{table}\n"));
    }
    text
}

/// Every number of two JSON values within 1e-10, relative to 1 or more.
fn agree(ours: &Value, theirs: &Value, way: &str, seen: &mut usize) {
    match (ours, theirs) {
        (Value::Number(a), Value::Number(b)) => {
            let (a, b) = (a.as_f64().unwrap(), b.as_f64().unwrap());
            assert!((a - b).abs() <= 1e-10 * b.abs().max(1.0), "{way}: {a} {b}");
            *seen += 1;
        }
        (Value::Object(a), Value::Object(b)) => {
            assert_eq!(a.keys().collect::<Vec<_>>(), b.keys().collect::<Vec<_>>(), "{way}");
            for (key, value) in a {
                agree(value, &b[key], &format!("{way}.{key}"), seen);
            }
        }
        (Value::Array(a), Value::Array(b)) => {
            assert_eq!(a.len(), b.len(), "{way}");
            a.iter().zip(b).enumerate().for_each(|(i, (a, b))| agree(a, b, &format!("{way}[{i}]"), seen));
        }
        (a, b) => assert_eq!(a, b, "{way}"),
    }
}

/// Reviews of 2024, 2025 and 2026, each carried from the one before, against one with all readings.
fn chain(scale: &str, series: &[(&str, &str, &str)]) {
    let desk = Desk::new(scale);
    let names: Vec<&str> = series.iter().map(|(name, ..)| *name).collect();
    let log =
        |text: String| text.replace("unit = \"mg/L\"", &format!("unit = \"mg/L\"\nscale = \"{scale}\""));
    let log = |text: String| match scale {
        "log" => log(text)
            .replace("sd = 1.1\n", "log_sd = 0.06\n")
            .replace("sd = 1.2, df", "log_sd = 0.06, df")
            .replace("between_sd = 0.9", "between_sd = 0.05")
            .replace("between_scale = 1.5", "between_scale = 0.08"),
        _ => text,
    };
    let from = |place: usize| -> Vec<(&str, String)> {
        let text = |own: &(&str, &str, &str)| if place == 0 { own.1.to_string() } else { own.2.to_string() };
        series.iter().map(|own| (own.0, text(own))).collect()
    };
    for (file, years) in [
        ("first.csv", 2019..=2024),
        ("2025.csv", 2025..=2025),
        ("2026.csv", 2026..=2026),
        ("all.csv", 2019..=2026),
    ] {
        fs::write(desk.0.join(file), csv(years, &names)).unwrap();
    }
    for (id, year, file, prior, place) in [
        ("carried-2024", 2024, "first.csv", "history", 0),
        ("carried-2025", 2025, "2025.csv", "carried", 1),
        ("carried-2026", 2026, "2026.csv", "carried", 1),
        ("afresh-2026", 2026, "all.csv", "history", 0),
    ] {
        let (status, said) = desk.report(id, &log(spec(id, year, file, prior, &from(place))));
        assert_eq!(status, 0, "{id}: {said}");
    }
    let (carried, afresh) = (desk.answers("carried-2026"), desk.answers("afresh-2026"));
    let mut seen = 0;
    for (a, b) in carried["series"].as_array().unwrap().iter().zip(afresh["series"].as_array().unwrap()) {
        let name = a["name"].as_str().unwrap();
        for part in ["posterior", "influence"] {
            agree(&a[part], &b[part], &format!("{name} {part}"), &mut seen);
        }
        agree(&a["prior"]["level"], &b["prior"]["level"], &format!("{name} prior"), &mut seen);
        for (own, other) in a["answers"].as_array().unwrap().iter().zip(b["answers"].as_array().unwrap()) {
            for field in ["estimate", "lower", "upper", "chance", "prior_only"] {
                agree(&own[field], &other[field], &format!("{name} {} {field}", own["id"]), &mut seen);
            }
        }
    }
    assert!(seen > 40 * series.len(), "{seen} figures were compared");

    let (status, said) = desk.run(&["audit", "reviews/carried-2026"]);
    assert_eq!(status, 0, "{said}");
    let stamped: Value =
        serde_json::from_slice(&fs::read(desk.0.join("reviews/carried-2026/stamp.json")).unwrap()).unwrap();
    let before = fs::read(desk.0.join("reviews/carried-2025/stamp.json")).unwrap();
    assert_eq!(stamped["previous"]["stamp"], reassay::source::sha256_hex(&before));
}

#[test]
fn a_carried_prior_equals_the_history_computed_afresh() {
    chain("linear", LINEAR);
}

#[test]
fn on_the_log_scale_too() {
    let some: Vec<_> = LINEAR.iter().filter(|own| ["known", "pooled"].contains(&own.0)).copied().collect();
    chain("log", &some);
}

/// The parts of a mixture weigh in the next year what the readings have left them. By hand: given the between sd τ
/// (0.9 and 0 here), the levels before 2024 say N(μ̂, τ² + V) of that year's level, methods §3.
#[test]
fn the_parts_of_a_mixture_are_carried_with_their_weights() {
    let desk = Desk::new("mixture");
    fs::write(desk.0.join("first.csv"), csv(2019..=2024, &["A"])).unwrap();
    fs::write(desk.0.join("2025.csv"), csv(2025..=2025, &["A"])).unwrap();
    let prior = "prior = { from = \"mixture\", parts = [ { weight = 0.7, from = \"history\", between_sd = 0.9, basis = \"made up\" }, { weight = 0.3, from = \"history\", between = \"none\" } ] }";
    let first = spec("carried-2024", 2024, "first.csv", "history", &[("A", prior.to_string())]);
    let (status, said) = desk.report("carried-2024", &first);
    assert_eq!(status, 0, "{said}");
    let (status, said) = desk.report("next", &spec("next", 2025, "2025.csv", "carried", &[]));
    assert_eq!(status, 0, "{said}");

    let sigma2 = 1.1 * 1.1;
    let mean = |year: u32| {
        let values = readings(0, year);
        (values.iter().sum::<f64>() / values.len() as f64, sigma2 / values.len() as f64)
    };
    let about = |tau: f64, last: u32| {
        let (mut weight, mut weighted) = (0.0, 0.0);
        for (mean, error) in (2019..=last).map(mean) {
            let own = 1.0 / (tau * tau + error);
            weight += own;
            weighted += own * mean;
        }
        (weighted / weight, 1.0 / weight)
    };
    let (came, error) = mean(2024);
    let shares = [(0.7, 0.9), (0.3, 0.0)].map(|(before, tau)| {
        let (centre, long) = about(tau, 2023);
        let variance = tau * tau + long + error;
        (
            before * reassay::math::fm::exp(-(came - centre) * (came - centre) / (2.0 * variance))
                / variance.sqrt(),
            tau,
        )
    });
    let all: f64 = shares.iter().map(|(share, _)| share).sum();
    let wanted: f64 = shares.iter().map(|(share, tau)| share / all * about(*tau, 2024).0).sum();
    let got = desk.answers("next")["series"][0]["prior"]["level"]["mean"].as_f64().unwrap();
    assert!((got - wanted).abs() < 1e-10 * wanted, "{got} {wanted}");
    assert!((shares[0].0 / all - 0.7).abs() > 0.005, "the readings have moved the weights: {shares:?}");
}

/// A stated long run with a known σ: closed form, by hand on the page of `carried`.
#[test]
fn a_stated_long_run_is_carried_in_closed_form() {
    let desk = Desk::new("long-run");
    let head = |id: &str, year: u32, more: &str, values: &str, prior: &str| {
        format!(
            "[review]\ntitle = \"Chain\"\nid = \"{id}\"\nperiod = {year}\ndate = 2026-02-01\nstatus = \"final\"\n{more}\n\
             [quantity]\nname = \"q\"\nunit = \"1\"\n[[readings]]\nvalues = {values}\n\
             [within]\nfrom = \"stated\"\nsd = 2.0\nbasis = \"made up\"\n[prior]\n{prior}\n\
             [[question]]\nid = \"level\"\nask = \"level interval\"\n"
        )
    };
    let stated = "from = \"stated\"\nmean = 42.0\nsd = 3.0\nof_period = \"long run\"\nbetween_sd = 2.0\nbasis = \"made up\"";
    let (status, said) = desk.report("a", &head("a", 2024, "", "[44.0, 46.0, 43.0, 47.0]", stated));
    assert_eq!(status, 0, "{said}");
    let previous = "previous = { review = \"reviews/a\" }";
    let (status, said) = desk.report("b", &head("b", 2025, previous, "[43.5]", "from = \"carried\""));
    assert_eq!(status, 0, "{said}");
    let level = desk.answers("b")["series"][0]["prior"]["level"].clone();
    let variance = 1.0 / (1.0 / 9.0 + 1.0 / 5.0);
    let mean: f64 = variance * (42.0 / 9.0 + 45.0 / 5.0);
    assert!((level["mean"].as_f64().unwrap() - mean).abs() < 1e-12 * mean, "{level}");
    assert!((level["sd"].as_f64().unwrap() - (variance + 4.0_f64).sqrt()).abs() < 1e-12, "{level}");

    // The mean of one reading was foretold as N(43.93, 3.214 + 4 + 4); Φ and its quantile by mpmath.
    let foretold = desk.answers("b")["previous"]["series"][0]["predictions"][0].clone();
    let number = |field: &str| foretold[field].as_f64().unwrap();
    assert!((number("cdf") - 0.4490829482547055).abs() < 1e-12, "{foretold}");
    assert!((number("lower") - 37.365095461149366).abs() < 1e-10, "{foretold}");
    assert_eq!((number("outcome"), number("inside")), (43.5, 1.0));
}

/// What changed since the previous review is said: answers, limits, questions and actions.
#[test]
fn the_previous_review_is_compared_with() {
    let desk = Desk::new("compared");
    fs::write(desk.0.join("first.csv"), csv(2019..=2024, &["A", "B"])).unwrap();
    fs::write(desk.0.join("2025.csv"), csv(2025..=2025, &["A", "C"])).unwrap();
    let limit = |value: &str| {
        format!(
            "[limit.g]\nvalue = {value}\nbasis = \"made up\"\napplies_to = \"level\"\n[[question]]\nid = \"limit\"\nask = \"level chance\"\nabove = \"g\"\n"
        )
    };
    let action = "[[action]]\nwhat = \"check the pump\"\nstate = \"open\"\n";
    let then = spec("carried-2024", 2024, "first.csv", "history", &[]) + &limit("22.5") + action;
    let now = (spec("next", 2025, "2025.csv", "carried", &[]) + &limit("23"))
        .replace("from = \"carried\"", "from = \"carried\"\notherwise = { from = \"flat\" }")
        .replace("above = 22.5", "above = 21.5");
    let (status, said) = desk.report("carried-2024", &then);
    assert_eq!(status, 0, "{said}");
    let (status, said) = desk.report("next", &now);
    assert_eq!(status, 0, "{said}");
    let answers = desk.answers("next");
    let before = desk.answers("carried-2024");
    let previous = &answers["previous"];
    assert_eq!(previous["limits"][0]["then"][0], 22.5);
    assert_eq!(previous["lost_actions"][0], "check the pump");
    assert_eq!(
        previous["series"][0]["answers"][0]["estimate"]["then"],
        before["series"][0]["answers"][0]["estimate"]
    );
    assert_eq!(
        previous["series"][0]["answers"][0]["estimate"]["now"],
        answers["series"][0]["answers"][0]["estimate"]
    );
    assert_eq!(previous["series"][0]["answers"][2]["asked_differently"][0], "above");
    assert_eq!(previous["series"][1]["why"]["answers"], "that review did not hold this series");
    let codes: Vec<&str> =
        answers["cautions"].as_array().unwrap().iter().map(|own| own["code"].as_str().unwrap()).collect();
    for code in ["open-action-missing", "limit-differs", "asked-differently", "prior-otherwise"] {
        assert!(codes.contains(&code), "{code} {codes:?}");
    }
    let (status, said) = desk.run(&["audit", "reviews/next"]);
    assert_eq!(status, 0, "{said}");
}

/// A desk with a final review of 2024, changed by `first`, and data of several kinds for 2025.
fn after_2024(name: &str, first: &dyn Fn(String) -> String) -> Desk {
    let desk = Desk::new(name);
    let body = |text: String| text.split_once('\n').unwrap().1.to_string();
    let both = csv(2024..=2025, &["A"]);
    for (file, text) in [
        ("first.csv", csv(2019..=2024, &["A"])),
        ("2025.csv", csv(2025..=2025, &["A"])),
        ("more.csv", csv(2018..=2018, &["A"]) + &body(csv(2025..=2025, &["A"]))),
        ("again.csv", csv(2024..=2024, &["A"]).replace(",2024,", ",2025,")),
        ("other.csv", both.replacen(",2024,2", ",2024,3", 1)),
        ("both.csv", both),
    ] {
        fs::write(desk.0.join(file), text).unwrap();
    }
    let (status, said) =
        desk.report("carried-2024", &first(spec("carried-2024", 2024, "first.csv", "history", &[])));
    assert_eq!(status, 0, "{said}");
    desk
}

/// What becomes of a review of 2025 carried from that of 2024, changed by `change`.
fn refusal(name: &str, first: &dyn Fn(String) -> String, change: &dyn Fn(String) -> String) -> (i32, String) {
    let desk = after_2024(name, first);
    if name == "changed" {
        let path: &Path = &desk.0.join("reviews/carried-2024/handover.json");
        let text = fs::read_to_string(path).unwrap().replacen('2', "3", 1);
        fs::write(path, text).unwrap();
    }
    if name == "superseded" {
        let stamp =
            reassay::source::sha256_hex(&fs::read(desk.0.join("reviews/carried-2024/stamp.json")).unwrap());
        let amended = spec("amended", 2024, "first.csv", "history", &[]).replace(
            "status = \"final\"",
            &format!("status = \"final\"\nsupersedes = {{ review = \"reviews/carried-2024\", stamp = \"{stamp}\", reason = \"a slip\" }}"),
        );
        let (status, said) = desk.report("amended", &amended);
        assert_eq!(status, 0, "{said}");
    }
    let result = desk.report("next", &change(spec("next", 2025, "2025.csv", "carried", &[])));
    assert!(result.0 == 0 || !desk.0.join("reviews/next").exists(), "a refused review leaves nothing");
    result
}

#[test]
fn the_ledger_lets_nothing_in_twice_and_nothing_fall_out() {
    let same = |text: String| text;
    let with = |file: &'static str| move |text: String| text.replace("2025.csv", file);
    let refused: [(&str, (i32, String), i32, &str); 9] = [
        ("again", refusal("again", &same, &with("again.csv")), 2, "the readings of 2025 are those of 2024"),
        (
            "more",
            refusal("more", &same, &with("more.csv")),
            2,
            "the data hold the period 2018, which the handover of reviews/carried-2024 does not",
        ),
        (
            "draft",
            refusal("draft", &|text| text.replace("status = \"final\"\n", ""), &same),
            2,
            "is not final and leaves no handover",
        ),
        ("superseded", refusal("superseded", &same, &same), 2, "is superseded by amended"),
        ("changed", refusal("changed", &same, &same), 2, "is not as its review left it"),
        (
            "unit",
            refusal("unit", &same, &|text| text.replace("unit = \"mg/L\"", "unit = \"ug/L\"")),
            2,
            "the unit of the review reviews/carried-2024 is \"mg/L\", here it is \"ug/L\"",
        ),
        (
            "same-period",
            refusal("same-period", &same, &|text| {
                text.replace("period = 2025", "period = 2024").replace("2025.csv", "both.csv")
            }),
            2,
            "which is not before 2024",
        ),
        (
            "stamp",
            refusal("stamp", &same, &|text| {
                text.replace(
                    "carried-2024\" }",
                    &format!("carried-2024\", stamp = \"{}\" }}", "0".repeat(64)),
                )
            }),
            2,
            "has another stamp",
        ),
        (
            "nowhere",
            refusal("nowhere", &same, &|text| text.replace("reviews/carried-2024", "reviews/lost")),
            3,
            "reviews/lost/stamp.json",
        ),
    ];
    for (name, (status, said), wanted, words) in refused {
        assert_eq!(status, wanted, "{name}: {said}");
        assert!(said.contains(words), "{name}: {said}");
        assert!(said.contains("next.toml:"), "{name} names its place: {said}");
    }
    // A period that the ledger holds: equal, it is said to be; different, the handover's readings are used.
    for (name, file, code) in [("both", "both.csv", None), ("other", "other.csv", Some("ledger-differs"))] {
        let desk = after_2024(name, &same);
        let next = spec("next", 2025, file, "carried", &[]);
        let (status, said) = desk.report("next", &next);
        assert_eq!(status, 0, "{said}");
        let (status, said) = desk.report(
            "plain",
            &next.replace(file, "2025.csv").replace("id = \"next\"\nperiod", "id = \"plain\"\nperiod"),
        );
        assert_eq!(status, 0, "{said}");
        let (with, without) = (desk.answers("next"), desk.answers("plain"));
        assert_eq!(with["series"][0]["answers"][0], without["series"][0]["answers"][0], "used once");
        let found: Vec<&str> =
            with["cautions"].as_array().unwrap().iter().filter_map(|own| own["code"].as_str()).collect();
        assert_eq!(found.contains(&"ledger-differs"), code.is_some(), "{name}: {found:?}");
        let report = fs::read_to_string(desk.0.join("reviews/next/report.md")).unwrap();
        assert_eq!(report.contains("The data hold 2024 too, equal to the ledger"), code.is_none(), "{name}");
    }
}
