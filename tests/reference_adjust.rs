//! Adjusted p-values against published and independently computed ones, and
//! against the closed tests that define them.

#[path = "common/tolerance.rs"]
mod tolerance;

use aforesaid::stats::adjust::{Procedure, adjust};
use proptest::prelude::*;
use tolerance::{CLASS_A, assert_close};

const ALL: [Procedure; 10] = [
    Procedure::None,
    Procedure::Bonferroni,
    Procedure::Sidak,
    Procedure::Holm,
    Procedure::HolmSidak,
    Procedure::Hochberg,
    Procedure::Hommel,
    Procedure::BenjaminiHochberg,
    Procedure::BenjaminiYekutieli,
    Procedure::FixedSequence,
];

fn procedure(name: &str) -> Procedure {
    match name {
        "bonferroni" => Procedure::Bonferroni,
        "holm" => Procedure::Holm,
        "hochberg" => Procedure::Hochberg,
        "hommel" => Procedure::Hommel,
        "BH" => Procedure::BenjaminiHochberg,
        "BY" => Procedure::BenjaminiYekutieli,
        other => panic!("the reference file names an unknown procedure, {other}"),
    }
}

fn adjusted(procedure: Procedure, p: &[f64]) -> Vec<f64> {
    let tested: Vec<Option<f64>> = p.iter().copied().map(Some).collect();
    adjust(procedure, &tested).into_iter().map(|p| p.expect("a tested member")).collect()
}

/// `reference/adjusted.csv`: definitions in 50-digit arithmetic, equal to R's
/// `stats::p.adjust`, for the example of Benjamini & Hochberg (1995), a family
/// with ties and the six interactions of Potthoff & Roy (1964).
#[test]
fn adjusted_values_agree_with_the_reference() {
    let text = include_str!("reference/adjusted.csv");
    let mut reader = csv::ReaderBuilder::new().comment(Some(b'#')).from_reader(text.as_bytes());
    let rows: Vec<csv::StringRecord> = reader.records().map(|r| r.expect("a row")).collect();
    let families: Vec<&[csv::StringRecord]> = rows.chunk_by(|a, b| a[0] == b[0] && a[1] == b[1]).collect();
    assert_eq!(families.len(), 18);
    for family in families {
        let number = |row: &csv::StringRecord, i: usize| row[i].parse::<f64>().expect("a number");
        let p: Vec<f64> = family.iter().map(|row| number(row, 2)).collect();
        let got = adjusted(procedure(&family[0][1]), &p);
        for (row, got) in family.iter().zip(got) {
            assert_close(&format!("{row:?}"), got, number(row, 3), CLASS_A);
        }
    }
}

/// Benjamini & Hochberg (1995), section 4.1: at .05 the false discovery rate
/// procedure rejects four hypotheses and Bonferroni's three.
#[test]
fn the_published_example_rejects_as_published() {
    let p = [0.0001, 0.0004, 0.0019, 0.0095, 0.0201, 0.0278, 0.0298, 0.0344, 0.0459, 0.3240, 0.4262, 0.5719, 0.6528, 0.7590, 1.0];
    let rejected = |procedure| adjusted(procedure, &p).iter().filter(|&&p| p <= 0.05).count();
    assert_eq!(rejected(Procedure::BenjaminiHochberg), 4);
    assert_eq!(rejected(Procedure::Bonferroni), 3);
}

/// Sidak's adjustment by hand, common practice: 1 - .99^3 and 1 - .98^2 exactly in
/// decimals, and the first-order value where 1 - p rounds to 1.
#[test]
fn sidak_values_are_exact_for_ordinary_and_tiny_p() {
    let single = adjusted(Procedure::Sidak, &[0.01, 0.02, 1.0]);
    assert_close("1 - .99^3", single[0], 0.029701, 1e-14);
    assert_close("1 - .98^3", single[1], 0.058808, 1e-14);
    assert_eq!(single[2], 1.0);
    let stepwise = adjusted(Procedure::HolmSidak, &[0.02, 0.01, 0.5]);
    assert_close("1 - .99^3", stepwise[1], 0.029701, 1e-14);
    assert_close("1 - .98^2", stepwise[0], 0.0396, 1e-14);
    assert_close("last", stepwise[2], 0.5, 1e-14);
    let tiny = adjusted(Procedure::Sidak, &[1e-280; 4]);
    assert_close("4 p to first order", tiny[0], 4e-280, 1e-14);
}

#[test]
fn a_member_without_a_p_counts_as_one_and_has_no_value() {
    let p = [Some(0.004), None, Some(0.03), Some(f64::NAN), Some(0.02)];
    let as_one = [0.004, 1.0, 0.03, 1.0, 0.02];
    for procedure in ALL {
        if procedure == Procedure::FixedSequence {
            continue;
        }
        let got = adjust(procedure, &p);
        let full = adjusted(procedure, &as_one);
        for (i, value) in got.iter().enumerate() {
            let expected = if i == 1 || i == 3 { None } else { Some(full[i]) };
            assert_eq!(*value, expected, "{procedure:?}, member {i}");
        }
    }
}

#[test]
fn a_gap_in_a_fixed_sequence_blocks_what_follows() {
    let p = [Some(0.01), Some(0.04), Some(0.02), None, Some(0.0001)];
    let got = adjust(Procedure::FixedSequence, &p);
    assert_eq!(got, [Some(0.01), Some(0.04), Some(0.04), None, Some(1.0)]);
}

#[test]
fn an_empty_family_has_no_values() {
    for procedure in ALL {
        assert!(adjust(procedure, &[]).is_empty());
    }
}

/// The adjusted value of a closed test: the largest local p over all
/// intersections that contain the hypothesis (Marcus, Peritz & Gabriel 1976).
fn closed_test(p: &[f64], local: impl Fn(&[f64]) -> f64) -> Vec<f64> {
    let mut adjusted = vec![0.0_f64; p.len()];
    for members in 1_u32..1 << p.len() {
        let inside = |i: &usize| members >> i & 1 == 1;
        let mut chosen: Vec<f64> = (0..p.len()).filter(inside).map(|i| p[i]).collect();
        chosen.sort_by(f64::total_cmp);
        let value = local(&chosen);
        for i in (0..p.len()).filter(inside) {
            adjusted[i] = adjusted[i].max(value);
        }
    }
    adjusted
}

fn bonferroni_test(sorted: &[f64]) -> f64 {
    (sorted.len() as f64 * sorted[0]).min(1.0)
}

fn sidak_test(sorted: &[f64]) -> f64 {
    let all_above = sorted.iter().fold(1.0, |product, _| product * (1.0 - sorted[0]));
    1.0 - all_above
}

fn simes_test(sorted: &[f64]) -> f64 {
    let size = sorted.len() as f64;
    let ranked = sorted.iter().enumerate();
    ranked.map(|(k, p)| size * p / (k as f64 + 1.0)).fold(1.0, f64::min)
}

fn family() -> impl Strategy<Value = Vec<f64>> {
    // Coarse values make ties, fine ones make near misses.
    let p = prop_oneof![0.0..1.0, (0_u32..=40).prop_map(|k| f64::from(k) / 40.0), 0.0..0.05];
    prop::collection::vec(p, 1..9)
}

fn close(got: &[f64], want: &[f64]) -> bool {
    got.iter().zip(want).all(|(g, w)| (g - w).abs() <= 1e-12)
}

proptest! {
    #![proptest_config(ProptestConfig { failure_persistence: None, ..ProptestConfig::default() })]

    #[test]
    fn holm_is_the_closed_bonferroni_test(p in family()) {
        prop_assert!(close(&adjusted(Procedure::Holm, &p), &closed_test(&p, bonferroni_test)));
    }

    #[test]
    fn holm_sidak_is_the_closed_sidak_test(p in family()) {
        prop_assert!(close(&adjusted(Procedure::HolmSidak, &p), &closed_test(&p, sidak_test)));
    }

    #[test]
    fn hommel_is_the_closed_simes_test(p in family()) {
        prop_assert!(close(&adjusted(Procedure::Hommel, &p), &closed_test(&p, simes_test)));
    }

    #[test]
    fn values_are_probabilities_not_below_p_and_keep_its_order(p in family()) {
        for procedure in ALL {
            let got = adjusted(procedure, &p);
            for i in 0..p.len() {
                prop_assert!(got[i] <= 1.0 && got[i] >= p[i] * (1.0 - 1e-14), "{procedure:?}");
                for j in 0..p.len() {
                    let ordered = procedure == Procedure::FixedSequence || p[i] > p[j] || got[i] <= got[j];
                    prop_assert!(ordered, "{procedure:?}");
                }
            }
        }
    }

    #[test]
    fn sharper_procedures_are_never_above_blunter_ones(p in family()) {
        let holm = adjusted(Procedure::Holm, &p);
        let hochberg = adjusted(Procedure::Hochberg, &p);
        let hommel = adjusted(Procedure::Hommel, &p);
        let rate = adjusted(Procedure::BenjaminiHochberg, &p);
        for i in 0..p.len() {
            prop_assert!(hochberg[i] <= holm[i] + 1e-14 && hommel[i] <= hochberg[i] + 1e-14);
            prop_assert!(rate[i] <= hommel[i] + 1e-14);
        }
    }

    #[test]
    fn refusing_a_member_never_helps_another(p in family(), refused in 0_usize..8) {
        prop_assume!(refused < p.len());
        let with: Vec<Option<f64>> = p.iter().copied().map(Some).collect();
        let mut without = with.clone();
        without[refused] = None;
        for procedure in ALL {
            let (with, without) = (adjust(procedure, &with), adjust(procedure, &without));
            for i in (0..p.len()).filter(|&i| i != refused) {
                prop_assert!(without[i] >= with[i], "{procedure:?}");
            }
        }
    }
}
