//! Data bound to a plan: subjects with their cell and their values.

/// Identifiers of subjects in one block of memory, sorted by bytes.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub struct Subjects {
    bytes: Vec<u8>,
    ends: Vec<u32>,
}

impl Subjects {
    /// From identifiers that are already sorted by bytes and distinct.
    pub fn from_sorted<'a>(identifiers: impl IntoIterator<Item = &'a [u8]>) -> Self {
        let mut subjects = Subjects::default();
        for identifier in identifiers {
            subjects.bytes.extend_from_slice(identifier);
            subjects.ends.push(subjects.bytes.len() as u32);
        }
        subjects
    }

    /// From identifiers that are already sorted and distinct, one after the other, and where each ends.
    pub(super) fn from_parts(bytes: Vec<u8>, ends: Vec<u32>) -> Self {
        Subjects { bytes, ends }
    }

    /// Room for so many identifiers of so many bytes together.
    pub(super) fn with_capacity(count: usize, bytes: usize) -> Self {
        Subjects { bytes: Vec::with_capacity(bytes), ends: Vec::with_capacity(count) }
    }

    /// Adds the next identifier, greater than all before.
    pub(super) fn push(&mut self, identifier: &[u8]) {
        self.bytes.extend_from_slice(identifier);
        self.ends.push(self.bytes.len() as u32);
    }

    /// How many.
    pub fn len(&self) -> usize {
        self.ends.len()
    }

    /// Whether there is none.
    pub fn is_empty(&self) -> bool {
        self.ends.is_empty()
    }

    /// The identifier of a subject.
    pub fn get(&self, subject: usize) -> &str {
        std::str::from_utf8(self.bytes(subject)).unwrap_or("")
    }

    /// The bytes of the identifier of a subject, by which subjects are sorted.
    pub fn bytes(&self, subject: usize) -> &[u8] {
        let start = if subject == 0 { 0 } else { self.ends[subject - 1] as usize };
        &self.bytes[start..self.ends[subject] as usize]
    }
}

/// Data bound to a plan, subjects in the order of their identifiers' bytes.
#[derive(Debug, Clone, PartialEq)]
pub struct Trial {
    /// The subjects.
    pub subjects: Subjects,
    /// Between cell of each subject, numbered as [`crate::plan::resolved::Design`] says.
    pub cell: Vec<u32>,
    /// Per outcome in plan order: subjects x occasions, row by row, occasions as the design numbers them; a missing
    /// value is NaN, which never leaves the analysis of completeness.
    pub values: Vec<Vec<f64>>,
    /// Per column that serves as a covariate, in the order of
    /// [`covariate_columns`](crate::plan::resolved::ResolvedPlan::covariate_columns): a value for each subject, NaN where it
    /// is missing.
    pub covariates: Vec<Vec<f64>>,
    /// Stratum of each subject, where arms are dealt again within strata.
    pub strata: Option<Vec<u32>>,
    /// Number of between cells.
    pub cells: usize,
    /// Number of occasions.
    pub occasions: usize,
}

impl Trial {
    /// Which subjects have a value of the outcome at each of these occasions; `None` where all have.
    pub fn complete(&self, outcome: usize, occasions: &[usize]) -> Option<Vec<bool>> {
        let complete = |row: &[f64]| occasions.iter().all(|occasion| !row[*occasion].is_nan());
        let rows = || self.values[outcome].chunks_exact(self.occasions.max(1));
        if rows().all(complete) { None } else { Some(rows().map(complete).collect()) }
    }
}
