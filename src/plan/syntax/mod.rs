//! YAML with a span for every value. Parsing never fails: it collects what it refuses.

pub mod tree;
