//! Columns kept beside the outcomes, a value for each subject: covariates, which are numbers, then strata, which are texts.

use super::table::{Sorted, UNSAID};
use crate::plan::resolved::ResolvedPlan;
use std::collections::HashMap;

/// The texts of a column, each with the number that stands for it.
pub(super) type Texts = HashMap<Vec<u8>, u64>;

/// The number that stands for a text of a column, which is taken up if new.
pub(super) fn id_of(texts: &mut Texts, text: &[u8]) -> u64 {
    match texts.get(text) {
        Some(id) => *id,
        None => {
            let id = texts.len() as u64;
            texts.insert(text.to_vec(), id);
            id
        }
    }
}

/// Numbers the texts of each column in the order of their bytes, so that the order of rows moves nothing; the texts in
/// that order, none where a column holds numbers.
pub(super) fn number_texts(sorted: &mut Sorted, texts: Vec<Texts>) -> Vec<Vec<Vec<u8>>> {
    let mut ordered = Vec::with_capacity(texts.len());
    for (column, texts) in sorted.further.iter_mut().zip(texts) {
        let mut known: Vec<(Vec<u8>, u64)> = texts.into_iter().collect();
        known.sort();
        let mut rank = vec![0_u64; known.len()];
        known.iter().enumerate().for_each(|(place, (_, id))| rank[*id as usize] = place as u64);
        if !known.is_empty() {
            column.iter_mut().filter(|id| **id != UNSAID).for_each(|id| *id = rank[*id as usize]);
        }
        ordered.push(known.into_iter().map(|(text, _)| text).collect());
    }
    ordered
}

/// Covariates, and the stratum of each subject where the plan has strata: combinations that occur, numbered in order.
pub(super) fn split(plan: &ResolvedPlan, sorted: &Sorted) -> (Vec<Vec<f64>>, Option<Vec<u32>>) {
    let numbers = plan.covariate_columns().len();
    let covariates = sorted.further.iter().take(numbers).map(|column| column.iter().map(|bits| f64::from_bits(*bits)).collect()).collect();
    let columns = sorted.further.get(numbers..).unwrap_or(&[]);
    let strata = (!columns.is_empty()).then(|| {
        let of = |subject: usize| columns.iter().map(|column| column[subject]).collect::<Vec<u64>>();
        let each: Vec<Vec<u64>> = (0..sorted.subjects.len()).map(of).collect();
        let mut known = each.clone();
        known.sort();
        known.dedup();
        each.iter().map(|stratum| known.binary_search(stratum).unwrap_or(0) as u32).collect()
    });
    (covariates, strata)
}
