//! Methods of tests.

use crate::plan::resolved::{FactorPart, Sides, Test, TestKind, Weights};

/// Names what a test rests on; `method` is the one that was used.
pub(super) fn methods(test: &Test, method: &str, add: &mut dyn FnMut(&str, &str)) {
    match method {
        "multivariate" => add(
            "Tests: multivariate criteria of the roots of H E^-1, with exact F where one exists",
            "Rao 1951; Pillai 1955; Muller & Peterson 1984",
        ),
        "welch-james" => add(
            "Tests: approximate degrees of freedom with the own covariance matrix of each cell; neither sphericity nor equal covariance matrices are assumed",
            "Johansen 1980; Keselman, Carriere & Lix 1993",
        ),
        "randomisation" => add(
            "Tests: arms dealt again among subjects as they were randomised; statistic the univariate F or, for one contrast, t; the hypothesis is that each subject's values would have been the same in another arm",
            "Phipson & Smyth 2010; Edgington & Onghena 2007",
        ),
        _ => add("Tests: univariate F of the hypothesis L B M = 0", "Kirk 2013; Maxwell & Delaney 2004"),
    }
    add(
        match test.weights {
            Weights::Equal => "Cell means are weighted equally",
            Weights::Observed => "Between cells are weighted by their number of subjects, occasions equally",
        },
        "Maxwell & Delaney 2004",
    );
    if !test.covariates.is_empty() {
        add(
            "Covariates centred at the mean of the subjects analysed; one slope per occasion, common to the arms",
            "Maxwell & Delaney 2004",
        );
    }
    if matches!(test.sides, Sides::One { .. }) {
        add("One-sided tests: the tail that the plan names; interval at 1 - 2 times the level", "common practice");
    }
    match test.kind {
        TestKind::Equivalence => add(
            "Equivalence: two one-sided tests, each at the level; the larger p counts; interval at 1 - 2 times the level",
            "Schuirmann 1987",
        ),
        TestKind::NonInferiority => {
            add("Non-inferiority: one one-sided test against the margin; interval at 1 - 2 times the level", "common practice")
        }
        TestKind::LargestContrast => add(
            "Largest contrast: the product contrast with the largest sum of squares; its p is a bound for all contrasts of the effect",
            "Scheffe 1953; Gabriel 1968",
        ),
        _ => {}
    }
    let parts = || test.hypotheses.iter().flat_map(|one| one.between.iter().chain(&one.within));
    if parts().any(|part| matches!(part, FactorPart::Trend { .. })) {
        add("Trends: orthogonal polynomials over the spacing of the levels, estimates per unit of spacing", "Maxwell & Delaney 2004");
    }
}
