//! Methods of sizes.

use crate::plan::resolved::Measure;

/// Names what a size and its interval rest on.
pub(super) fn methods(measure: Measure, interval: &str, add: &mut dyn FnMut(&str, &str)) {
    match measure {
        Measure::StandardizedDifference => {
            add("Standardized difference: second minus first arm over the standardizer", "Hedges 1981; Glass 1976; Bonett 2008")
        }
        Measure::DifferenceInStandardizedChange => add(
            "Difference in standardized change: d of pretest, posttest and control, with the pooled standard deviation before",
            "Morris 2008",
        ),
        Measure::ProbabilityOfSuperiority => {
            add("Probability of superiority, ties counted half", "Mann & Whitney 1947; DeLong, DeLong & Clarke-Pearson 1988")
        }
        Measure::RobustStandardizedDifference => add(
            "Robust standardized difference: 0.642 times 20 % trimmed means over the Winsorized standard deviation",
            "Algina, Keselman & Penfield 2005",
        ),
        Measure::Responders => add("Responders: shares by Wilson's interval, differences by Newcombe's", "Wilson 1927; Newcombe 1998"),
        Measure::ReliableChange => add("Reliable change: change over the standard error of a difference", "Jacobson & Truax 1991"),
    }
    match interval {
        "bonett" => add("Intervals of standardized differences: Bonett's variance", "Bonett 2008"),
        "noncentral-t" => add("Intervals of standardized differences: noncentral t inverted", "Cumming & Finch 2001"),
        "morris" => add("Intervals of differences in standardized change: Morris's variance", "Morris 2008"),
        "bca" => bootstrap(add),
        _ => {}
    }
}

/// The bootstrap.
pub(super) fn bootstrap(add: &mut dyn FnMut(&str, &str)) {
    add(
        "Intervals by the bootstrap: subjects drawn again within arms, bias-corrected and accelerated; acceleration by jackknife within arms",
        "Efron 1987",
    );
}
