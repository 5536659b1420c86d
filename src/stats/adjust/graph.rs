use super::probability;
use std::fmt;

/// Sums of shares may pass one by what rounding of decimals leaves.
const SLACK: f64 = 1e-12;

/// A graph by which tests hand their alpha on: a weight for each hypothesis, and what each hands to each other.
#[derive(Clone, Debug, PartialEq)]
pub struct Graph {
    weights: Vec<f64>,
    transfers: Vec<Vec<f64>>,
}

/// Why a graph is none.
#[derive(Clone, Debug, PartialEq)]
pub enum GraphError {
    /// Weights and transfers are of different sizes.
    Sizes,
    /// A share is not between 0 and 1.
    Share {
        /// The share.
        share: f64,
    },
    /// The weights sum to more than one.
    Weights {
        /// Their sum.
        sum: f64,
    },
    /// What a hypothesis hands on sums to more than one.
    Row {
        /// The hypothesis, counted from 0.
        row: usize,
        /// The sum.
        sum: f64,
    },
    /// A hypothesis hands alpha to itself.
    Diagonal {
        /// The hypothesis, counted from 0.
        row: usize,
    },
}

impl fmt::Display for GraphError {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            GraphError::Sizes => write!(out, "a graph has one weight and one row of transfers for each hypothesis"),
            GraphError::Share { share } => write!(out, "a share of {share} is not between 0 and 1"),
            GraphError::Weights { sum } => write!(out, "the weights sum to {sum}, which spends more than alpha"),
            GraphError::Row { row, sum } => write!(out, "hypothesis {} hands on {sum} of its alpha, more than it has", row + 1),
            GraphError::Diagonal { row } => write!(out, "hypothesis {} hands alpha to itself", row + 1),
        }
    }
}

impl std::error::Error for GraphError {}

/// One update of a graph.
#[derive(Clone, Debug, PartialEq)]
pub struct Update {
    /// The hypothesis that is taken out.
    pub rejected: usize,
    /// Its adjusted p.
    pub adjusted: f64,
    /// Weights after it.
    pub weights: Vec<f64>,
    /// Transfers after it.
    pub transfers: Vec<Vec<f64>>,
}

/// Adjusted p-values of a graph, and how they came about.
#[derive(Clone, Debug, PartialEq)]
pub struct GraphResult {
    /// In the order of the hypotheses; none where a test was not carried out.
    pub adjusted: Vec<Option<f64>>,
    /// The updates in order, down to the last hypothesis that alpha can reach.
    pub updates: Vec<Update>,
}

impl Graph {
    /// A graph of these weights and transfers (rows give, columns receive).
    ///
    /// # Errors
    /// Shares outside 0 to 1, sums above one, a transfer to itself.
    pub fn new(weights: Vec<f64>, transfers: Vec<Vec<f64>>) -> Result<Graph, GraphError> {
        let size = weights.len();
        if transfers.len() != size || transfers.iter().any(|row| row.len() != size) {
            return Err(GraphError::Sizes);
        }
        if let Some(&share) = weights.iter().chain(transfers.iter().flatten()).find(|share| !(0.0..=1.0).contains(*share)) {
            return Err(GraphError::Share { share });
        }
        let sum = weights.iter().sum::<f64>();
        if sum > 1.0 + SLACK {
            return Err(GraphError::Weights { sum });
        }
        for (row, shares) in transfers.iter().enumerate() {
            let sum = shares.iter().sum::<f64>();
            if sum > 1.0 + SLACK {
                return Err(GraphError::Row { row, sum });
            }
            if shares[row] != 0.0 {
                return Err(GraphError::Diagonal { row });
            }
        }
        Ok(Graph { weights, transfers })
    }

    /// The fallback procedure (Wiens 2003): in the order given, each hands all its alpha to the next.
    ///
    /// # Errors
    /// As for [`new`](Self::new).
    pub fn fallback(weights: Vec<f64>) -> Result<Graph, GraphError> {
        let size = weights.len();
        let row = |from: usize| (0..size).map(|to| if to == from + 1 { 1.0 } else { 0.0 }).collect();
        Graph::new(weights, (0..size).map(row).collect())
    }

    /// Adjusted p-values by the sequentially rejective algorithm (Bretz, Maurer, Brannath & Posch 2009, algorithm 2): the
    /// hypothesis with the smallest p / weight is taken out, its weight handed on, and so forth; adjusted p-values never
    /// fall along the way. `None` is never taken out, and what it holds stays with it.
    ///
    /// ```
    /// use aforesaid::stats::adjust::Graph;
    /// // Two hypotheses that hand all to each other: Holm's procedure.
    /// let holm = Graph::new(vec![0.5, 0.5], vec![vec![0.0, 1.0], vec![1.0, 0.0]]).unwrap();
    /// assert_eq!(holm.adjust(&[Some(0.02), Some(0.03)]).adjusted, [Some(0.04), Some(0.04)]);
    /// ```
    ///
    /// # Panics
    /// Where the number of p-values is not that of the hypotheses: a slip of the caller.
    pub fn adjust(&self, p: &[Option<f64>]) -> GraphResult {
        let size = self.weights.len();
        assert_eq!(p.len(), size, "one p for each hypothesis");
        let p: Vec<Option<f64>> = p.iter().map(|&p| probability(p)).collect();
        let (mut weights, mut transfers) = (self.weights.clone(), self.transfers.clone());
        let mut waiting: Vec<usize> = (0..size).filter(|&one| p[one].is_some()).collect();
        let mut adjusted: Vec<Option<f64>> = p.iter().map(|p| p.map(|_| 1.0)).collect();
        let mut updates = Vec::new();
        let mut largest = 0.0_f64;
        loop {
            let ratio = |one: usize| p[one].filter(|_| weights[one] > 0.0).map(|p| p / weights[one]);
            let next = waiting.iter().enumerate().filter_map(|(place, &one)| ratio(one).map(|ratio| (place, ratio)));
            let Some((place, ratio)) = next.reduce(|best, other| if other.1 < best.1 { other } else { best }) else { break };
            let rejected = waiting.remove(place);
            largest = largest.max(ratio).min(1.0);
            adjusted[rejected] = Some(largest);
            hand_on(rejected, &mut weights, &mut transfers);
            updates.push(Update { rejected, adjusted: largest, weights: weights.clone(), transfers: transfers.clone() });
        }
        GraphResult { adjusted, updates }
    }
}

fn hand_on(rejected: usize, weights: &mut [f64], transfers: &mut [Vec<f64>]) {
    let size = weights.len();
    let given = weights[rejected];
    let row = transfers[rejected].clone();
    for (weight, share) in weights.iter_mut().zip(&row) {
        *weight += given * share;
    }
    weights[rejected] = 0.0;
    for (from, shares) in transfers.iter_mut().enumerate() {
        let through = shares[rejected];
        let loop_back = through * row[from];
        for to in 0..size {
            shares[to] = if from == rejected || to == rejected || from == to || loop_back >= 1.0 {
                0.0
            } else {
                (shares[to] + through * row[to]) / (1.0 - loop_back)
            };
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Bretz et al. (2011), origin from memory; the verdict was computed independently: at alpha .025 only the first is
    /// rejected.
    #[test]
    fn a_worked_example_rejects_the_first_only() {
        let transfers = vec![vec![0.0, 0.5, 0.5, 0.0], vec![0.5, 0.0, 0.0, 0.5], vec![0.0, 1.0, 0.0, 0.0], vec![1.0, 0.0, 0.0, 0.0]];
        let graph = Graph::new(vec![0.5, 0.5, 0.0, 0.0], transfers).unwrap();
        let result = graph.adjust(&[Some(0.0121), Some(0.0337), Some(0.0084), Some(0.0160)]);
        let rejected: Vec<bool> = result.adjusted.iter().map(|p| p.unwrap() <= 0.025).collect();
        assert_eq!(rejected, [true, false, false, false]);
    }

    #[test]
    fn what_is_no_graph_is_said() {
        assert_eq!(Graph::new(vec![0.6, 0.6], vec![vec![0.0; 2]; 2]), Err(GraphError::Weights { sum: 1.2 }));
        assert_eq!(Graph::new(vec![0.5], vec![vec![0.5]]), Err(GraphError::Diagonal { row: 0 }));
        let row = Graph::new(vec![0.2; 3], vec![vec![0.0, 0.75, 0.5], vec![0.0; 3], vec![0.0; 3]]);
        assert_eq!(row, Err(GraphError::Row { row: 0, sum: 1.25 }));
    }
}
