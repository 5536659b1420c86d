//! What commands say: answers on standard output, all else on standard error.

use super::Format;
use crate::record::error::StudyError;
use crate::text::diagnostic::{Diagnostic, Severity};
use crate::text::render::{to_json, to_text};
use crate::world::World;
use std::cell::Cell;
use std::io;

/// The exit status where the machine failed.
const MACHINE_FAILED: u8 = 3;

/// Findings shown in text; the rest are counted.
const MOST_SHOWN: usize = 100;

/// Why a command did not do what was asked.
#[derive(Debug)]
pub(super) enum Failure {
    /// Errors or warnings.
    Findings(Vec<Diagnostic>),
    /// The study folder or the machine.
    Study(StudyError),
    /// Anything else: exit status, what is wrong, what to do.
    Other { status: u8, message: String, hint: String },
}

impl From<StudyError> for Failure {
    fn from(error: StudyError) -> Self {
        Failure::Study(error)
    }
}

impl Failure {
    pub fn other(message: impl Into<String>, hint: impl Into<String>) -> Self {
        Failure::Other { status: 1, message: message.into(), hint: hint.into() }
    }
}

/// The person at the terminal, or the program at the pipe.
pub(super) struct Terminal<'w> {
    pub world: &'w dyn World,
    /// Why an answer could not be written, such as a full disk.
    lost: Cell<Option<io::Error>>,
}

impl<'w> Terminal<'w> {
    pub fn new(world: &'w dyn World) -> Self {
        Terminal { world, lost: Cell::new(None) }
    }

    /// What was asked for. A reader that went away ends it in silence.
    pub fn answer(&self, text: &str) {
        let mut out = self.world.stdout();
        match out.write_all(text.as_bytes()).and_then(|()| out.flush()) {
            Err(error) if error.kind() != io::ErrorKind::BrokenPipe => self.lost.set(Some(error)),
            _ => {}
        }
    }

    /// The status to end with: the machine's failure where an answer was lost, else `status`.
    pub fn ended(&self, status: u8) -> u8 {
        match self.lost.take() {
            None => status,
            Some(error) => {
                self.aside(&format!("error: the answer could not be written to standard output: {error}\n"));
                MACHINE_FAILED
            }
        }
    }

    /// All else.
    pub fn aside(&self, text: &str) {
        let mut out = self.world.stderr();
        let _ = out.write_all(text.as_bytes()).and_then(|()| out.flush());
    }

    pub fn findings_in_text(&self, findings: &[Diagnostic], colour: bool) -> String {
        let mut text = to_text(&findings[..findings.len().min(MOST_SHOWN)], colour);
        if findings.len() > MOST_SHOWN {
            text.push_str(&format!("\n... and {} more findings; `--format json` gives all of them\n", findings.len() - MOST_SHOWN));
        }
        text
    }

    pub fn colour_aside(&self) -> bool {
        self.world.stderr_is_terminal() && !self.world.no_color()
    }

    pub fn colour_answer(&self) -> bool {
        self.world.stdout_is_terminal() && !self.world.no_color()
    }

    /// Says why a command failed and gives its exit status.
    pub fn fail(&self, failure: Failure, format: Format) -> u8 {
        match failure {
            Failure::Findings(findings) => {
                match format {
                    Format::Text => self.aside(&format!(
                        "{}\n{}\n",
                        self.findings_in_text(&findings, self.colour_aside()).trim_end(),
                        counted(&findings)
                    )),
                    Format::Json => self.answer(&format!("{}\n", to_json(&findings))),
                }
                1
            }
            Failure::Study(error) => {
                self.aside(&format!("error: {error}\n"));
                error.exit_status()
            }
            Failure::Other { status, message, hint } => {
                let hint = if hint.is_empty() { String::new() } else { format!("  = help: {hint}\n") };
                self.aside(&format!("error: {message}\n{hint}"));
                status
            }
        }
    }
}

/// Such as `2 errors, 1 warning`.
pub(super) fn counted(findings: &[Diagnostic]) -> String {
    let count = |severity| findings.iter().filter(|finding| finding.severity == severity).count();
    let plural = |count: usize, word: &str| format!("{count} {word}{}", if count == 1 { "" } else { "s" });
    let parts: Vec<String> = [(Severity::Error, "error"), (Severity::Warning, "warning"), (Severity::Note, "note")]
        .into_iter()
        .map(|(severity, word)| (count(severity), word))
        .filter(|(count, _)| *count > 0)
        .map(|(count, word)| plural(count, word))
        .collect();
    if parts.is_empty() { "no findings".to_owned() } else { parts.join(", ") }
}
