//! Numbers to text, held to published examples and to its own promises.

use super::*;
use proptest::prelude::*;

fn places(uncertainty: f64) -> Places {
    Places::of_uncertainty(uncertainty).unwrap()
}

/// JCGM 100:2008, 7.2.6: y = 10,057 62 Ω with u = 27 mΩ is to be given as 10,058 Ω; u = 28,05 kHz is to be
/// rounded down to 28 kHz. (Quoted from memory of the text. Its 10,47 mΩ may be rounded up to 11 mΩ there by
/// choice; here uncertainties are rounded to the nearest.)
#[test]
fn examples_of_the_gum() {
    assert_eq!(places(0.027).value(10.05762), "10.058");
    assert_eq!(places(28.05).value(28.05), "28");
    assert_eq!(places(10.47).value(10.47), "10");
}

/// JCGM 100:2008, 7.2.2 gives m_S = 100,021 47 g with u = 0,35 mg (from memory of the text).
#[test]
fn the_mass_standard_of_the_gum() {
    let (value, uncertainty) = value_with_uncertainty(100.02147, 0.00035);
    assert_eq!((value.as_str(), uncertainty.as_str()), ("100.02147", "0.00035"));
}

#[test]
fn an_uncertainty_that_rounds_up_to_the_next_power_keeps_two_digits() {
    assert_eq!(places(0.0996).value(0.0996), "0.10");
    assert_eq!(places(0.996).value(0.996), "1.0");
    assert_eq!(places(99.6).value(99.6), "100");
    assert_eq!(places(99.6).value(1234.0), "1230");
}

#[test]
fn no_place_without_an_uncertainty() {
    for uncertainty in [0.0, -1.0, f64::NAN, f64::INFINITY] {
        assert_eq!(Places::of_uncertainty(uncertainty), None);
    }
}

/// Ties by hand: 0.125, 0.375, 2.5 and 25 are exact in binary; 2.675 and 1.005 are not, and lie just below.
#[test]
fn ties_go_to_even_and_only_true_ties_are_ties() {
    assert_eq!(Places(2).value(0.125), "0.12");
    assert_eq!(Places(2).value(0.375), "0.38");
    assert_eq!(Places(0).value(2.5), "2");
    assert_eq!(Places(0).value(3.5), "4");
    assert_eq!(Places(2).value(2.675), "2.67");
    assert_eq!(Places(2).value(1.005), "1.00");
    assert_eq!(Places(-1).value(25.0), "20");
    assert_eq!(Places(-1).value(35.0), "40");
    assert_eq!(Places(-1).value(25.000000001), "30");
    assert_eq!(Places(-2).value(9951.0), "10000");
    assert_eq!(Places(-1).value(4.9), "0");
}

#[test]
fn never_rounded_twice() {
    assert_eq!(Places(1).value(0.4496), "0.4");
    assert_eq!(Places(0).value(0.4999999999999999), "0");
}

#[test]
fn signs_and_numbers_that_do_not_exist() {
    assert_eq!(Places(1).value(-4.25), "−4.2");
    assert_eq!(Places(1).value(-0.04), "0.0");
    assert_eq!(Places(1).value(f64::NAN), "not defined");
    assert_eq!(Places(1).value(f64::NEG_INFINITY), "−∞");
}

#[test]
fn tiny_and_huge_numbers_take_scientific_form() {
    assert_eq!(places(1.3e-9).value(4.2e-7), "4.200 × 10^-7");
    assert_eq!(places(0.2e-6).value(-4.2e-7), "−4.2 × 10^-7");
    assert_eq!(places(3e148).value(1.234567e150), "1.235 × 10^150");
    assert_eq!(places(3e-152).value(1.234567e-150), "1.235 × 10^-150");
    assert_eq!(places(1.0).value(1e150), "1.00000000000000 × 10^150");
    assert_eq!(places(0.5e-7).value(0.0), "0");
    assert_eq!(places(1e-8).value(123.456789012), "123.456789012");
    assert_eq!(significant(123456789.0, 3), "123000000");
    assert_eq!(significant(1234567890123.0, 3), "1.23 × 10^12");
    assert_eq!(significant(0.0, 3), "0");
}

#[test]
fn at_least_the_digits_of_the_limit() {
    assert_eq!(Places::of_written("50"), Places(0));
    assert_eq!(Places::of_written("12.50"), Places(2));
    assert_eq!(Places::of_written("5e-3"), Places(3));
    assert_eq!(Places::of_written("1.5e3"), Places(0));
    assert_eq!(places(14.0).at_least(Places::of_written("50.0")).value(44.123), "44.1");
}

#[test]
fn rounding_never_flips_a_comparison() {
    let equal = Places(1).against(50.0, 50.0);
    assert_eq!((equal.text.as_str(), equal.shown), ("50.0", Shown::AsUsual));
    let near = Places(1).against(50.0004, 50.0);
    assert_eq!((near.text.as_str(), near.shown), ("50.0004", Shown::MoreDigits(3)));
    let nearer = Places(1).against(49.99999999, 50.0);
    assert_eq!((nearer.text.as_str(), nearer.shown), ("50.0000", Shown::NotShown(Ordering::Less)));
    assert!(nearer.remark().is_some_and(|remark| remark.contains("just below")));
    let across = Places(0).against(49.6, 49.8);
    assert_eq!((across.text.as_str(), across.shown), ("49.6", Shown::MoreDigits(1)));
}

#[test]
fn probabilities_are_never_nought_or_one() {
    for (chance, text) in [
        (0.0, "< 0.001"),
        (0.00099, "< 0.001"),
        (0.001, "0.001"),
        (0.0125, "0.013"),
        (0.5, "0.500"),
        (0.999, "0.999"),
        (0.9995, "> 0.999"),
        (1.0, "> 0.999"),
    ] {
        assert_eq!(probability(chance), text, "{chance}");
    }
    assert_eq!(probability(f64::NAN), NOT_DEFINED);
    assert_eq!(probability(1.5), NOT_DEFINED);
}

#[test]
fn probabilities_beside_a_threshold() {
    assert_eq!(probability_against(0.94996, 0.95).text, "0.94996");
    assert_eq!(probability_against(0.9497, 0.95).text, "0.9497");
    assert_eq!(probability_against(0.9494, 0.95).text, "0.949");
    assert_eq!(probability_against(0.95, 0.95).text, "0.9500");
    assert_eq!(
        probability_against(0.95 - 1e-9, 0.95),
        Compared { text: "0.9500000".into(), shown: Shown::NotShown(Ordering::Less) }
    );
    assert_eq!(probability_against(0.2, 0.95).text, "0.200");
    assert_eq!(probability_against(1e-9, 0.05).text, "< 0.001");
    assert_eq!(probability_against(0.9998, 0.99999).text, "0.9998");
    assert_eq!(probability_against(2e-5, 1e-5).text, "0.00002");
}

#[test]
fn chances_in_words() {
    for (chance, text) in [
        (0.0004, "less than 1 in 1000"),
        (0.001, "about 1 in 1000"),
        (0.0123, "about 1 in 81"),
        (0.025, "about 1 in 40"),
        (0.0043, "about 1 in 230"),
        (0.1, "about 1 in 10"),
        (0.31, "about 3 in 10"),
        (0.52, "about 1 in 2"),
        (0.975, "about 39 in 40"),
        (0.9996, "more than 999 in 1000"),
    ] {
        assert_eq!(chance_in_words(chance), text, "{chance}");
    }
}

#[test]
fn shares_in_per_cent() {
    assert_eq!(percent(0.0), "< 0.1\u{a0}%");
    assert_eq!(percent(0.0625), "6.2\u{a0}%");
    assert_eq!(percent(0.123), "12.3\u{a0}%");
    assert_eq!(percent(1.0), "> 99.9\u{a0}%");
    assert_eq!(percent_as_stated(0.95), "95\u{a0}%");
    assert_eq!(percent_as_stated(0.999), "99.9\u{a0}%");
    assert_eq!(percent_as_stated(-1.25), "−125\u{a0}%");
}

#[test]
fn counts_are_grouped_from_five_digits_up() {
    assert_eq!(count(0), "0");
    assert_eq!(count(4096), "4096");
    assert_eq!(count(12480), "12\u{202f}480");
    assert_eq!(count(20_000_000), "20\u{202f}000\u{202f}000");
}

#[test]
fn records_are_the_shortest_form() {
    assert_eq!(record(0.1), "0.1");
    assert_eq!(record(-4.0), "-4");
    assert_eq!(record(1e300), "1e300");
    assert_eq!(record(-2.5e-7), "-2.5e-7");
}

proptest! {
    #[test]
    fn record_reads_back_as_the_same_number(number in any::<f64>().prop_filter("finite", |x| x.is_finite())) {
        prop_assert_eq!(record(number).parse::<f64>().unwrap().to_bits(), number.to_bits());
    }

    #[test]
    fn a_rounded_number_is_within_half_a_unit_of_its_place(number in -1e12f64..1e12, decimals in -6i32..6) {
        let rounded = Rounded::new(number, decimals).as_number();
        let unit: f64 = format!("1e{}", -decimals).parse().unwrap();
        prop_assert!((rounded - number).abs() <= unit * 0.5000001 + number.abs() * 1e-15);
    }

    #[test]
    fn the_printed_order_is_the_true_order_or_said_not_to_be(
        number in -100f64..100.0, step in -1e-3f64..1e-3, decimals in 0i32..4,
    ) {
        let reference = number + step;
        let compared = Places(decimals).against(number, reference);
        let printed: f64 = compared.text.replace(MINUS, "-").parse().unwrap();
        if !matches!(compared.shown, Shown::NotShown(_)) {
            prop_assert_eq!(printed.partial_cmp(&reference), number.partial_cmp(&reference));
        }
    }

    #[test]
    fn a_probability_beside_a_threshold_shows_its_side(chance in 0f64..=1.0, threshold in 0.001f64..0.999) {
        let compared = probability_against(chance, threshold);
        if let Ok(printed) = compared.text.parse::<f64>() && !matches!(compared.shown, Shown::NotShown(_)) {
            prop_assert_eq!(printed.partial_cmp(&threshold), chance.partial_cmp(&threshold));
        }
    }
}
