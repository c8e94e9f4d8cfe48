//! Reading handover.json back, for a prior that is carried from one period to the next.

use super::model::{read_evidence, read_model, read_scale};
use super::{FORMAT, Handed, HandedPiece, Handover, LedgerLine};
use crate::diagnostics::Fault;
use crate::json::At;
use crate::json::Json;
use crate::quantity::Period;

impl Handover {
    /// Reads the bytes of a handover.json that the user knows as `name`.
    pub fn read(bytes: &[u8], name: &str) -> Result<Handover, Fault> {
        let wrong = |why: String| {
            Fault::wrong("bad-handover", format!("{name} cannot be read as a handover: {why}"))
                .expected(format!("a handover.json of the format {FORMAT}, unchanged"))
                .repair("take it from the review's folder again and audit that folder")
        };
        let json = Json::read(bytes).map_err(wrong)?;
        whole(&At::root(&json)).map_err(wrong)
    }
}

fn whole(at: &At<'_>) -> Result<Handover, String> {
    let format = at.key("format")?;
    if format.as_text()? != FORMAT {
        return Err(format.fault(&format!("\"{FORMAT}\"")));
    }
    let quantity = at.key("quantity")?;
    Ok(Handover {
        review: at.text("review")?.to_string(),
        period: Period::new(at.text("period")?),
        quantity: quantity.text("name")?.to_string(),
        unit: quantity.text("unit")?.to_string(),
        scale: read_scale(&quantity.key("scale")?)?,
        series: at.each("series", handed)?,
    })
}

fn handed(at: &At<'_>) -> Result<Handed, String> {
    let model = match at.maybe("model") {
        Some(model) => Ok(read_model(&model)?),
        None => Err(at.key("why")?.text("model")?.to_string()),
    };
    Ok(Handed {
        name: at.text("name")?.to_string(),
        model,
        readings: read_evidence(&at.key("readings")?)?,
        pieces: at.each("pieces", piece)?,
        part_weights: at.each("part_weights", At::as_number)?,
        ledger: at.each("ledger", ledger_line)?,
    })
}

fn piece(at: &At<'_>) -> Result<HandedPiece, String> {
    let pair = |key: &str| {
        let numbers = at.each(key, At::as_number)?;
        match numbers.as_slice() {
            [mean, variance] => Ok((*mean, *variance)),
            _ => Err(at.key(key)?.fault("mean and variance")),
        }
    };
    let pair_if = |key: &str| at.maybe(key).map(|_| pair(key)).transpose();
    Ok(HandedPiece {
        weight: at.number("weight")?,
        next_level: pair_if("next_level")?,
        level: pair_if("level")?,
        long_run_mean: pair_if("long_run_mean")?,
        between_sd: at.number_if("between_sd")?,
        reading_sd: at.number("reading_sd")?,
    })
}

fn ledger_line(at: &At<'_>) -> Result<LedgerLine, String> {
    Ok(LedgerLine {
        period: Period::new(at.text("period")?),
        evidence: read_evidence(&at.key("evidence")?)?,
        n: at.maybe("n").map(|_| at.whole("n")).transpose()?,
        sha256: at.maybe("sha256").map(|sha256| sha256.as_text().map(str::to_string)).transpose()?,
    })
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::data::evidence::{Evidence, Seen, Single};
    use crate::prior::{Between, LevelPrior, Model, Pattern, Periods, Within};
    use crate::quantity::Scale;
    use proptest::prelude::*;

    fn number() -> impl Strategy<Value = f64> {
        prop_oneof![-1e3..1e3, Just(0.1 + 0.2), Just(5e-324), Just(1.7e308), -1e-12..1e-12]
    }

    fn evidence() -> impl Strategy<Value = Evidence> {
        let single = prop_oneof![
            number().prop_map(Seen::At),
            number().prop_map(Seen::Below),
            number().prop_map(Seen::Above),
            (number(), number(), number()).prop_map(|(lower, at, upper)| Seen::Rounded { lower, at, upper }),
        ];
        let single = (single, number()).prop_map(|(seen, uncertainty)| Single { seen, uncertainty });
        prop_oneof![
            Just(Evidence::Nothing),
            (1..99u64, number(), prop::option::of(number()), number())
                .prop_map(|(n, mean, ss, rest)| Evidence::Sums { n, mean, ss, rest }),
            (number(), number()).prop_map(|(mean, uncertainty)| Evidence::Mean { mean, uncertainty }),
            prop::collection::vec(single, 1..4).prop_map(Evidence::Singles),
        ]
    }

    fn periods() -> impl Strategy<Value = Periods> {
        let pattern = prop_oneof![
            Just(Pattern::AboutAMean),
            (prop::collection::vec(number(), 0..3), number())
                .prop_map(|(gaps, last_gap)| Pattern::RandomWalk { gaps, last_gap }),
        ];
        let between = prop_oneof![
            Just(Between::Uniform),
            number().prop_map(Between::HalfNormal),
            number().prop_map(Between::HalfCauchy),
            number().prop_map(Between::Known),
            Just(Between::None),
            Just(Between::Reml),
            Just(Between::Moments),
        ];
        let one = ("[0-9]{4}(/[0-9]{2})?", evidence()).prop_map(|(name, own)| (Period::new(&name), own));
        (prop::collection::vec(one, 0..4), pattern, between, number())
            .prop_map(|(periods, pattern, between, weight)| Periods { periods, pattern, between, weight })
    }

    fn prior() -> impl Strategy<Value = LevelPrior> {
        let leaf = prop_oneof![
            Just(LevelPrior::Flat),
            (number(), number()).prop_map(|(mean, sd)| LevelPrior::Stated { mean, sd }),
            (number(), number()).prop_map(|(mean, readings)| LevelPrior::Worth { mean, readings }),
            (number(), number(), number()).prop_map(|(mean, sd, between_sd)| LevelPrior::LongRun {
                mean,
                sd,
                between_sd
            }),
            periods().prop_map(LevelPrior::Periods),
            periods().prop_map(LevelPrior::Peers),
        ];
        leaf.prop_recursive(2, 6, 3, |inner| {
            prop::collection::vec((number(), inner), 1..3).prop_map(LevelPrior::Mixture)
        })
    }

    fn model() -> impl Strategy<Value = Model> {
        let within = prop_oneof![
            number().prop_map(Within::Known),
            (number(), number()).prop_map(|(sd, df)| Within::Worth { sd, df }),
            prop::collection::vec(evidence(), 0..3).prop_map(|others| Within::Pooled { others }),
            Just(Within::Readings),
            Just(Within::None),
        ];
        let scale = prop_oneof![Just(Scale::Linear), Just(Scale::Log)];
        (scale, within, prior(), number()).prop_map(|(scale, within, level, bias_sd)| Model {
            scale,
            within,
            level,
            bias_sd,
            adjust: None,
        })
    }

    fn handed() -> impl Strategy<Value = Handed> {
        let pair = || (number(), number());
        let maybe = || prop::option::of(pair());
        let piece = (number(), maybe(), maybe(), maybe(), number()).prop_map(
            |(weight, next_level, level, long_run_mean, reading_sd)| HandedPiece {
                weight,
                next_level,
                level,
                long_run_mean,
                between_sd: next_level.map(|next| next.0),
                reading_sd,
            },
        );
        let line = (evidence(), prop::option::of(1..9u64), prop::option::of("[0-9a-f]{64}")).prop_map(
            |(evidence, n, sha256)| LedgerLine { period: Period::new("2024"), evidence, n, sha256 },
        );
        let model = prop_oneof![model().prop_map(Ok), ".{0,12}".prop_map(Err)];
        (
            ".{1,8}",
            model,
            evidence(),
            prop::collection::vec(piece, 0..4),
            prop::collection::vec(number(), 0..3),
            prop::collection::vec(line, 0..3),
        )
            .prop_map(|(name, model, readings, pieces, part_weights, ledger)| Handed {
                name,
                model,
                readings,
                pieces,
                part_weights,
                ledger,
            })
    }

    proptest! {
        #[test]
        fn what_is_handed_over_reads_back_the_same(series in prop::collection::vec(handed(), 0..4)) {
            let handover = Handover {
                review: "SF-2025".into(),
                period: Period::new("2025"),
                quantity: "nitrate".into(),
                unit: "mg/L".into(),
                scale: Scale::Linear,
                series,
            };
            prop_assert_eq!(Handover::read(&handover.to_json().to_file(), "handover.json"), Ok(handover));
        }
    }

    #[test]
    fn faults_say_where() {
        let message = |text: &str| Handover::read(text.as_bytes(), "h.json").unwrap_err().message;
        assert_eq!(
            message("{\"format\": \"reassay-handover/9\"}"),
            "h.json cannot be read as a handover: format: expected \"reassay-handover/1\", found \"reassay-handover/9\""
        );
        let text = "{\"format\": \"reassay-handover/1\", \"review\": \"a\", \"period\": \"2025\", \
                    \"quantity\": {\"name\": \"q\", \"unit\": \"1\", \"scale\": \"linear\"}, \
                    \"series\": [{\"name\": \"s\", \"model\": {\"scale\": \"linear\", \"within\": \
                    {\"kind\": \"known\", \"sd\": null}}}]}";
        assert_eq!(
            message(text),
            "h.json cannot be read as a handover: series[0].model.within.sd: expected a number, found null"
        );
        assert!(message("{").contains("EOF"), "{}", message("{"));
    }
}
