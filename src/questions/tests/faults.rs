//! Faulty questions: every fault has a code and a place, and all are found in one run.

use super::*;

fn codes(scale: &str, keys: &str) -> Vec<&'static str> {
    let faults = faults(scale, &format!("[[question]]\nid = \"q\"\n{keys}"));
    assert!(faults.iter().all(|fault| fault.place.is_some()), "{faults:?}");
    faults.iter().map(|fault| fault.code).collect()
}

#[test]
fn each_wrong_way_has_its_code() {
    let table: &[(&str, &str)] = &[
        ("ask = \"level chanse\"\nabove = 50", "unknown-question"),
        ("ask = \"level chance\"", "missing-key"),
        ("ask = \"level chance\"\nabove = 50\nbelow = 40", "either-or"),
        ("ask = \"level chance\"\nabove = \"guidline\"", "unknown-limit"),
        ("ask = \"level chance\"\nabove = \"band\"", "two-sided-limit"),
        ("ask = \"level chance\"\noutside = \"guideline\"", "one-sided-limit"),
        ("ask = \"level chance\"\nbetween = [60, 40]", "out-of-order"),
        ("ask = \"level chance\"\nbetween = 50", "wrong-type"),
        ("ask = \"level chance\"\nabove = [40, 50]", "wrong-type"),
        ("ask = \"level chance\"\nabove = 50\nmean = \"arithmetic\"", "wrong-scale"),
        ("ask = \"level chance\"\nabove = 50\nabvoe = 3", "unknown-key"),
        ("ask = \"level interval\"\nprobability = 95", "out-of-range"),
        ("ask = \"level interval\"\ninterval = \"centrl\"", "wrong-value"),
        ("ask = \"reading interval\"\nof_period = \"long run\"", "no-such-quantity"),
        ("ask = \"reading interval\"\nreadings = 12", "not-clear"),
        ("ask = \"reading interval\"\nof = \"all\"", "missing-key"),
        (
            "ask = \"reading interval\"\nreadings = 3\nof = \"all\"\ninterval = \"shortest\"",
            "no-such-quantity",
        ),
        ("ask = \"reading interval\"\nreadings = 20000\nof = \"mean\"", "out-of-range"),
        ("ask = \"reading chance\"\nabove = 50\nreadings = 3", "not-clear"),
        ("ask = \"reading chance\"\nabove = 50\nreadings = 3\nat_least = 4", "out-of-range"),
        ("ask = \"reading chance\"\nabove = 50\nreadings = 3\nat_least = 1\nof = \"each\"", "either-or"),
        ("ask = \"reading chance\"\nabove = 50\nof = \"mean\"", "missing-key"),
        ("ask = \"count beyond\"\nabove = 50", "missing-key"),
        ("ask = \"count beyond\"\nabove = 50\nreadings = 1001", "out-of-range"),
        ("ask = \"share beyond\"\nabove = 50\nmore_than = 5", "out-of-range"),
        ("ask = \"percentile\"", "missing-key"),
        ("ask = \"percentile\"\npercentile = 0.95", "out-of-range"),
        ("ask = \"percentile\"\npercentile = 0.05", "out-of-range"),
        ("ask = \"percentile\"\npercentile = 100", "out-of-range"),
        ("ask = \"percentile\"\npercentile = 95\nabove = 50\nbelow = 40", "either-or"),
        ("ask = \"characteristic value\"\npercentile = 0", "out-of-range"),
        ("ask = \"period mean\"", "missing-key"),
        ("ask = \"classes\"\nbounds = [50, 25]", "out-of-order"),
        ("ask = \"classes\"\nbounds = [25, 50]\nnames = [\"low\", \"high\"]", "wrong-number"),
        ("ask = \"classes\"\nbounds = []", "missing-value"),
        ("ask = \"sd interval\"", "missing-key"),
        ("ask = \"sd interval\"\nsd = \"betwen\"", "wrong-value"),
        ("ask = \"readings beyond\"", "missing-key"),
        ("ask = \"change\"\nagainst = 2025", "no-such-quantity"),
        ("ask = \"change\"\nabove = 1\nbelow = 0", "either-or"),
        ("ask = \"change\"\nband = [1, -1]", "wrong-type"),
        ("ask = \"change\"\nband = -1", "wrong-type"),
        ("ask = \"change\"\nagainst = [2024]", "wrong-type"),
        ("ask = \"difference\"", "missing-key"),
        ("ask = \"difference\"\nseries = [\"A\", \"A\"]", "wrong-number"),
        ("ask = \"ranking\"\nfirst = \"higest\"", "wrong-value"),
        ("ask = \"readings needed\"", "missing-key"),
        ("ask = \"readings needed\"\nhalf_width = 0.5\nrule_of = \"q\"", "either-or"),
        ("ask = \"readings needed\"\nhalf_width = 0.5\nassurance = 0.8", "key-out-of-place"),
        ("ask = \"readings needed\"\nhalf_width = 0.5\ntry = [0]", "wrong-type"),
        (
            "ask = \"readings needed\"\nrule_of = \"other\"\nverdict = \"a\"\nassurance = 0.8",
            "unknown-question-id",
        ),
    ];
    for (keys, code) in table {
        assert_eq!(codes("linear", keys), [*code], "{keys}");
    }
}

#[test]
fn the_log_scale_has_faults_of_its_own() {
    assert_eq!(codes("log", "ask = \"level chance\"\nabove = 0"), ["out-of-range"]);
    assert_eq!(codes("log", "ask = \"level chance\"\noutside = [-1, 5]"), ["out-of-range"]);
    assert_eq!(codes("log", "ask = \"change\"\nabove = 0"), ["out-of-range"]);
    assert_eq!(codes("log", "ask = \"change\"\nband = 0.9"), ["wrong-type"]);
    assert_eq!(codes("log", "ask = \"readings needed\"\nhalf_width = 0.5"), ["out-of-range"]);
    assert_eq!(codes("log", "ask = \"classes\"\nbounds = [0, 5]"), ["out-of-range"]);
    let keys = "ask = \"level interval\"\nmean = \"arithmetic\"\nof_period = \"long run\"";
    assert_eq!(codes("log", keys), ["no-such-quantity"]);
    assert!(codes("log", "ask = \"level interval\"\nmean = \"arithmetic\"").is_empty());
}

#[test]
fn a_rule_asks_only_for_figures_that_there_are() {
    let rule = |ask: &str, condition: &str| {
        codes(
            "linear",
            &format!(
                "{ask}\n[question.rule]\nverdicts = [ {{ say = \"a\", {condition} }}, {{ say = \"b\" }} ]"
            ),
        )
    };
    let chance = "ask = \"level chance\"\nabove = 50";
    assert!(rule(chance, "chance_at_least = 0.95").is_empty());
    assert_eq!(rule(chance, "estimate_above = 50"), ["condition-without-figure"]);
    assert_eq!(
        rule("ask = \"percentile\"\npercentile = 95", "chance_at_least = 0.95"),
        ["condition-without-figure"]
    );
    assert!(rule("ask = \"percentile\"\npercentile = 95\nabove = 50", "chance_at_least = 0.95").is_empty());
    let upper = "ask = \"level interval\"\ninterval = \"upper bound\"";
    assert_eq!(rule(upper, "lower_above = 50"), ["condition-without-figure"]);
    assert!(rule(upper, "upper_below = \"guideline\"").is_empty());
    assert!(rule("ask = \"readings beyond\"\nabove = 50", "count_at_least = 1").is_empty());
}

#[test]
fn all_faults_are_found_in_one_run() {
    let faults = faults(
        "linear",
        "[[question]]\nid = \"a\"\nask = \"level chance\"\n[[question]]\nid = \"b\"\nask = \"percentile\"\npercentile = 0.95",
    );
    assert_eq!(faults.iter().map(|fault| fault.code).collect::<Vec<_>>(), ["missing-key", "out-of-range"]);
    assert_eq!(faults[1].repair.as_deref(), Some("write percentile = 95"));
    assert_eq!(faults[1].place.as_ref().map(|place| place.excerpt.as_str()), Some("percentile = 0.95"));
}

#[test]
fn a_limit_meant_for_something_else_gives_a_caution() {
    let cautions = |keys: &str| {
        let put = put("linear", keys);
        put.question.cautions(&put.plan).len()
    };
    assert_eq!(cautions("ask = \"level chance\"\nabove = \"guideline\""), 0);
    assert_eq!(cautions("ask = \"level chance\"\nabove = \"single\""), 1);
    assert_eq!(cautions("ask = \"reading chance\"\nabove = \"guideline\""), 1);
    assert_eq!(cautions("ask = \"reading chance\"\nabove = \"single\""), 0);
    assert_eq!(cautions("ask = \"reading chance\"\nabove = 50"), 0);
}

#[test]
fn words_and_symbols_say_what_is_asked() {
    let posterior = example();
    let said = |keys: &str| {
        let put = put("linear", keys);
        let subject = put.subject(&posterior, None);
        (put.question.words(&subject), put.question.symbols(&subject))
    };
    let (words, symbols) = said("ask = \"level chance\"\nabove = \"guideline\"");
    assert_eq!(words, "probability that the level of 2025 lies above 45.0 mg/L (guideline)");
    assert_eq!(symbols, "P(θ > 45.0 | prior, readings)");
    let (words, symbols) = said("ask = \"level chance\"\noutside = \"band\"\nof_period = \"next\"");
    assert_eq!(words, "probability that the level of 2026 lies outside 40.0 to 46.0 mg/L (band)");
    assert_eq!(symbols, "P(θ_next < 40.0 or θ_next > 46.0 | prior, readings)");
    let (words, _) =
        said("ask = \"reading chance\"\nabove = 50\nreadings = 12\nat_least = 1\nof_period = \"next\"");
    assert_eq!(words, "probability that at least one of 12 readings of 2026 lies above 50 mg/L");
    let (words, symbols) = said("ask = \"reading interval\"\nreadings = 10\nof = \"all\"\nprobability = 0.9");
    assert_eq!(words, "predictive central 90 % interval holding all of the next 10 readings of 2025 at once");
    assert_eq!(symbols, "P(a ≤ all x_new ≤ b | prior, readings) = 0.9");
    let (words, _) = said("ask = \"percentile\"\npercentile = 97.5\ninterval = \"upper bound\"");
    assert_eq!(words, "upper 95 % bound of the 97.5th percentile of the readings of 2025");
}

#[test]
fn settings_read_again_give_the_same_question() {
    let posterior = example();
    for keys in [
        "ask = \"level interval\"",
        "ask = \"level chance\"\noutside = \"band\"",
        "ask = \"reading interval\"\nreadings = 4\nof = \"all\"",
        "ask = \"reading chance\"\nabove = 45\nreadings = 4\nat_least = 2",
        "ask = \"share beyond\"\nabove = \"guideline\"\nmore_than = 0.05",
        "ask = \"percentile\"\npercentile = 95\nabove = 45.5",
        "ask = \"characteristic value\"",
        "ask = \"count beyond\"\nbelow = 43\nreadings = 3",
        "ask = \"period mean\"\nreadings = 6\nabove = 43",
        "ask = \"classes\"\nbounds = [42, 44]",
        "ask = \"readings beyond\"\nabove = 45",
        "ask = \"change\"\nagainst = 2019\nband = 1.5",
        "ask = \"difference\"\nseries = [\"A\", \"B\"]\nbelow = 1",
        "ask = \"ranking\"\nfirst = \"lowest\"",
        "ask = \"readings needed\"\nhalf_width = 0.5\ntry = [4, 12]",
    ] {
        let first = put("linear", keys);
        let ask = keys.lines().next().unwrap_or_default();
        let settings: Vec<String> =
            first.question.settings().into_iter().map(|(key, value)| format!("{key} = {value}")).collect();
        let again = put("linear", &format!("{ask}\n{}", settings.join("\n")));
        assert_eq!(again.question.settings(), first.question.settings());
        assert_eq!(again.figures(&posterior), first.figures(&posterior));
    }
}
