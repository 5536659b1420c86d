//! Shapiro and Wilk's test against AS R94 in 50 digits.

#[path = "common/tolerance.rs"]
mod tolerance;

use aforesaid::stats::hypothesis::shapiro_wilk;
use aforesaid::stats::model::Refusal;
use tolerance::assert_close;

/// `reference/shapiro_wilk.csv`: the formulas of Royston (1995) in 50 digits, mpmath; R's shapiro.test agrees to 13 digits.
#[test]
fn sixteen_samples_agree_with_fifty_digit_values() {
    let mut reader = csv::ReaderBuilder::new().comment(Some(b'#')).from_reader(include_str!("reference/shapiro_wilk.csv").as_bytes());
    let mut compared = 0;
    for row in reader.records() {
        let row = row.expect("a readable row");
        let values: Vec<f64> = row[3].split(' ').map(|x| x.parse().expect("a value")).collect();
        let got = shapiro_wilk(&values).expect("a test");
        assert_close(&format!("{} W", &row[0]), got.w, row[1].parse().expect("W"), 1e-14);
        assert_close(&format!("{} p", &row[0]), got.p, row[2].parse().expect("p"), 1e-12);
        // Neither the order nor the unit matters.
        let turned: Vec<f64> = values.iter().rev().map(|x| x * 0.25).collect();
        assert_eq!(shapiro_wilk(&turned).expect("a test"), got);
        compared += 1;
    }
    assert_eq!(compared, 16);
}

/// Shapiro & Wilk (1965), *Biometrika* 52:606: weights of eleven men; W by AS R94 in an independent script.
#[test]
fn worked_example_of_the_authors() {
    let got = shapiro_wilk(&[148.0, 154.0, 158.0, 160.0, 161.0, 162.0, 166.0, 170.0, 182.0, 195.0, 236.0]).expect("a test");
    assert!((got.w - 0.78881).abs() <= 5e-6 && (got.p - 0.006704).abs() <= 5e-7, "{got:?}");
}

/// Three values: 6 / pi [asin sqrt W - asin sqrt(3/4)], which is 0 for (1, 1, 2) and 1 for equal spacing; R agrees.
#[test]
fn three_values_have_an_exact_probability() {
    assert_eq!(shapiro_wilk(&[1.0, 1.0, 2.0]).expect("a test").p, 0.0);
    let even = shapiro_wilk(&[1.0, 2.0, 3.0]).expect("a test");
    assert!((even.w - 1.0).abs() < 1e-15 && (even.p - 1.0).abs() < 1e-7, "{even:?}");
}

/// An offset costs no digits as long as the values themselves keep them.
#[test]
fn offsets_and_extreme_units_do_not_matter() {
    let plain = shapiro_wilk(&[1.0, 2.0, 4.0, 9.0, 3.0]).expect("a test");
    let far = shapiro_wilk(&[1e12 + 1.0, 1e12 + 2.0, 1e12 + 4.0, 1e12 + 9.0, 1e12 + 3.0]).expect("a test");
    assert_eq!(plain, far);
    let huge = shapiro_wilk(&[1e307, 2e307, 4e307, 9e307, 3e307]).expect("a test");
    assert_close("huge", huge.p, plain.p, 1e-12);
    let wide = shapiro_wilk(&[-1.7e308, 0.0, 1.7e308]).expect("a test");
    assert!((wide.w - 1.0).abs() < 1e-14);
}

#[test]
fn what_cannot_be_tested_is_refused_with_its_reason() {
    assert_eq!(shapiro_wilk(&[1.0, 2.0]), Err(Refusal::TooFewValues { given: 2, fewest: 3 }));
    let many: Vec<f64> = (0..5001).map(f64::from).collect();
    let refusal = shapiro_wilk(&many).expect_err("a refusal");
    assert_eq!(refusal, Refusal::TooManyValues { given: 5001, most: 5000 });
    assert!(refusal.to_string().contains("reaches to 5000 only"));
    assert!(shapiro_wilk(&many[..5000]).is_ok());
    assert_eq!(shapiro_wilk(&[4.2; 8]), Err(Refusal::ConstantValues));
    assert_eq!(shapiro_wilk(&[1.0, 1.0 + f64::EPSILON, 1.0]), Err(Refusal::ConstantValues));
    assert_eq!(shapiro_wilk(&[1.0, f64::NAN, 2.0]), Err(Refusal::ValueNotFinite { position: 1 }));
}

/// R 4's shapiro.test.
#[test]
fn one_value_apart_from_equal_ones() {
    let mut values = vec![0.0; 10];
    values.push(1.0);
    for (values, w, p) in [
        (values.as_slice(), 0.3449912051158, 2.24340190161e-8),
        (&[0.0, 0.0, 0.0, 1.0], 0.6297762649137, 0.00124072593198),
        (&[0.0, 0.0, 0.0, 0.0, 0.0, 1.0], 0.4960944033116, 2.0729244385e-5),
    ] {
        let got = shapiro_wilk(values).expect("a test");
        assert_close("W", got.w, w, 1e-11);
        assert_close("p", got.p, p, 1e-10);
    }
}
