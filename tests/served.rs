//! A within sd that this period's readings alone tell is no hindrance: what it leaves unknown before the readings is
//! absent with its reason, and never stops the review. The data are invented.

use std::fs;

#[test]
fn a_within_sd_from_the_readings_alone_stops_no_question() {
    let desk = std::env::temp_dir().join(format!("reassay-served-{}", std::process::id()));
    fs::create_dir_all(&desk).unwrap();
    let priors = [
        "from = \"flat\"",
        "from = \"stated\"\nmean = 20.0\nsd = 2.0\nbasis = \"made up\"",
        "from = \"stated\"\nmean = 20.0\nsd = 2.0\nof_period = \"long run\"\nbetween_sd = 0.8\nbasis = \"made up\"",
    ];
    for (place, prior) in priors.iter().enumerate() {
        let spec = format!(
            "[review]\ntitle = \"All\"\nid = \"all-{place}\"\nperiod = 2025\ndate = 2026-02-01\n\
             [quantity]\nname = \"q\"\nunit = \"1\"\n\
             [limit.g]\nvalue = 21.5\nbasis = \"made up\"\napplies_to = \"level\"\n\
             [[readings]]\nvalues = [19.6, 21.2, 20.1, 18.9, 20.8]\n\
             [[summaries]]\nrows = [ {{ period = 2024, n = 5, mean = 19.4, sd = 1.1 }} ]\n\
             [within]\nfrom = \"readings\"\n[prior]\n{prior}\n\
             [[question]]\nid = \"over\"\nask = \"level chance\"\nabove = \"g\"\n\
             [question.rule]\nagreed = 2024-01-01\nverdicts = [ {{ say = \"above\", chance_at_least = 0.9 }}, {{ say = \"below\", chance_at_most = 0.1 }}, {{ say = \"not decided\" }} ]\n\
             [[question]]\nid = \"share\"\nask = \"share beyond\"\noutside = [18.0, 22.0]\nmore_than = 0.05\n\
             [[question]]\nid = \"moved\"\nask = \"change\"\n"
        );
        let path = desk.join(format!("all-{place}.toml"));
        fs::write(&path, spec).unwrap();
        let findings = reassay::review::run(&path, "all.toml", 1).expect("every question is answered");
        let answers = &findings.series[0].answers;
        assert_eq!(answers.len(), 3);
        if place == 0 {
            // By mpmath at 20 digits: the integral over σ² ~ SS/χ²(4) of the chance that the level lies where more
            // than 0.05 of the readings are outside, cut where that holds for every level.
            let chance = answers[1].figures.value("chance").expect("a chance");
            assert!((chance - 0.568_180_121_477_968).abs() < 1e-12, "{chance}");
        }
        for (answer, figure) in answers.iter().zip(["chance", "upper", "estimate"]) {
            assert!(answer.figures.value(figure).is_some(), "{place} {}: {:?}", answer.id, answer.figures);
        }
    }
    let _ = fs::remove_dir_all(desk);
}
