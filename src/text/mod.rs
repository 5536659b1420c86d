//! Source text, places in it, and what is said about them.
//!
//! A [`diagnostic::Diagnostic`] is self-contained: it carries file name, line, column and the lines of text that it
//! points at, so that a message about a file too large to keep in memory renders like one about a plan.

pub mod diagnostic;
pub mod render;
pub mod source;
pub mod suggest;
