//! `run`: executes the sealed plan and commits a record.

use super::output::{Failure, Terminal};
use super::{DONE, RunArguments, files};
use crate::canon::hash::Digest;
use crate::conduct::{Conducted, DataHashes, conduct, status_of};
use crate::data::allocation::{Allocation, read_allocation};
use crate::data::bind::bind;
use crate::data::read::{ReadArms, read_data};
use crate::data::table::Table;
use crate::plan::resolved::AllocationPlace;
use crate::plan::seal::{SealedPlan, reopen};
use crate::record::ledger::{Happening, Opens};
use crate::record::run::{Copying, Incoming, Received, RunFacts, Unblinded};
use crate::record::state::StudyState;
use crate::record::study::Study;
use crate::text::diagnostic::Diagnostic;
use crate::text::render::to_text;
use crate::world::{Kind, Links};
use indicatif::{ProgressBar, ProgressDrawTarget, ProgressStyle};
use std::io::{self, Read};
use std::path::Path;
use std::sync::mpsc;
use std::time::Duration;

/// Work shorter than this many seconds shows no progress.
const QUIET_SECONDS: i64 = 1;

pub(super) fn run(terminal: &Terminal<'_>, arguments: &RunArguments) -> Result<u8, Failure> {
    files::must_be_a_file(terminal, &arguments.data, "data file")?;
    if let Some(allocation) = &arguments.allocation {
        files::must_be_a_file(terminal, allocation, "allocation file")?;
    }
    let study = Study::open(terminal.world, &arguments.study)?;
    let (number, folder) = study.current_plan()?;
    let seal = folder.seal.clone();
    let plan = reopen(&format!("{}/plans/{number:03}/plan.yaml", arguments.study.display()), &folder.source).map_err(Failure::Findings)?;
    if plan.resolved_bytes() != folder.resolved {
        return Err(Failure::other(
            format!("the plan sealed as number {number} compiles to another meaning than the one sealed with it"),
            format!("it was sealed by release {}; run it with that release", seal.release),
        ));
    }
    match (plan.resolved().data.allocation, &arguments.allocation) {
        (AllocationPlace::SeparateFile, None) => {
            return Err(Failure::other("the plan keeps the allocation in a file of its own", "name it with `--allocation FILE`"));
        }
        (AllocationPlace::InTheData | AllocationPlace::NoArms, Some(_)) => {
            return Err(Failure::other("the sealed plan keeps no allocation in a file of its own", "leave `--allocation` out"));
        }
        _ => {}
    }
    let copying = if arguments.no_data_copy { Copying::HashOnly } else { Copying::Keep };
    let mut opened = match plan.resolved().data.allocation {
        AllocationPlace::InTheData => open_data_with_arms(terminal, arguments, &plan, study, copying)?,
        _ => open_allocation(terminal, arguments, &plan, study, copying)?,
    };
    let hashes = DataHashes {
        data: opened.data.hash(),
        content: opened.table.content,
        allocation: opened.allocation.as_ref().map(|(_, received)| received.hash()),
    };
    let (allocation, received_allocation) = match opened.allocation.take() {
        Some((allocation, received)) => (Some(allocation), Some(received)),
        None => (None, None),
    };
    let (trial, notes) = match bind(plan.resolved(), opened.table, allocation) {
        Ok(bound) => bound,
        Err(findings) => return give_up(opened.unblinded, findings),
    };
    if !notes.is_empty() {
        terminal.aside(&format!("{}\n", to_text(&notes, terminal.colour_aside())));
    }
    let state = opened.unblinded.state();
    let event = opened.unblinded.event_hash();
    let first = match opened.unblinded.record_number() {
        1 => None,
        _ => Some(state.record_file(terminal.world, &arguments.study, 1, "results.json")?),
    };
    let status = status_of(&seal, &state.ledger.events, &event, opened.unblinded.record_number(), first.as_deref());
    let conducted = match watched(terminal, |watch| conduct(&plan, &trial, &hashes, &event, &status, watch)) {
        Ok(conducted) => conducted,
        Err(error) => {
            opened.unblinded.abandon(&error.to_string())?;
            return Err(Failure::other(
                error.to_string(),
                "this is a fault of the program; keep the study folder and tell its maintainers",
            ));
        }
    };
    let facts = RunFacts { data: opened.data, allocation: received_allocation, content: hashes.content, decisions: conducted.decisions };
    let Conducted { files, results, .. } = conducted;
    let committed = opened.unblinded.commit(facts, files)?;
    tell(terminal, arguments, &results, committed.record, &committed.head.to_string());
    Ok(DONE)
}

struct Opened<'w> {
    unblinded: Unblinded<'w>,
    table: Table,
    data: Received,
    allocation: Option<(Allocation, Received)>,
}

/// Data first, which hold no arms; then the ledger is told; only then is the allocation opened.
fn open_allocation<'w>(
    terminal: &Terminal<'_>,
    arguments: &RunArguments,
    plan: &SealedPlan,
    mut study: Study<'w>,
    copying: Copying,
) -> Result<Opened<'w>, Failure> {
    let incoming = study.receive(copying)?;
    let (table, data) =
        take_in(terminal, incoming, &arguments.data, |name, reader| read_data(plan.resolved(), name, reader, ReadArms::No))?;
    let table = match table {
        Ok(table) => table,
        Err(findings) => {
            study.discard_received()?;
            return Err(Failure::Findings(findings));
        }
    };
    if let Err(failure) = correct(&mut study, arguments, Some(&data)) {
        study.discard_received()?;
        return Err(failure);
    }
    let mut unblinded = study.log_unblinded(Opens::Allocation)?;
    let Some(path) = &arguments.allocation else {
        return Ok(Opened { unblinded, table, data, allocation: None });
    };
    let incoming = unblinded.receive(copying)?;
    let (allocation, received) = take_in(terminal, incoming, path, |name, reader| read_allocation(plan.resolved(), name, reader))?;
    let last = last_run(unblinded.state()).filter(|last| arguments.correction.is_none() && last.allocation != Some(received.hash()));
    match (allocation, last) {
        (Ok(_), Some(last)) => say_what_was_corrected(unblinded, &last, "another allocation"),
        (Ok(allocation), None) => Ok(Opened { unblinded, table, data, allocation: Some((allocation, received)) }),
        (Err(findings), _) => give_up(unblinded, findings),
    }
}

/// The ledger is told before data that hold arms are opened.
fn open_data_with_arms<'w>(
    terminal: &Terminal<'_>,
    arguments: &RunArguments,
    plan: &SealedPlan,
    mut study: Study<'w>,
    copying: Copying,
) -> Result<Opened<'w>, Failure> {
    correct(&mut study, arguments, None)?;
    let mut unblinded = study.log_unblinded(Opens::Data)?;
    let incoming = unblinded.receive(copying)?;
    let (table, data) =
        take_in(terminal, incoming, &arguments.data, |name, reader| read_data(plan.resolved(), name, reader, ReadArms::Yes))?;
    let last = last_run(unblinded.state()).filter(|last| arguments.correction.is_none() && last.data != data.hash());
    match (table, last) {
        (Ok(_), Some(last)) => say_what_was_corrected(unblinded, &last, "other data"),
        (Ok(table), None) => Ok(Opened { unblinded, table, data, allocation: None }),
        (Err(findings), _) => give_up(unblinded, findings),
    }
}

fn say_what_was_corrected<T>(unblinded: Unblinded<'_>, last: &LastRun, what: &str) -> Result<T, Failure> {
    let failure = uncorrected(last, what);
    unblinded.abandon("a run after the first did not say what was corrected")?;
    Err(failure)
}

fn give_up<T>(unblinded: Unblinded<'_>, findings: Vec<Diagnostic>) -> Result<T, Failure> {
    unblinded.abandon("the data or the allocation do not fit the plan")?;
    Err(Failure::Findings(findings))
}

/// A run after the first says what was corrected, unless it reads the same bytes again: data here, where they hold no arms,
/// and what could tell the arms once it has been opened.
fn correct(study: &mut Study<'_>, arguments: &RunArguments, data: Option<&Received>) -> Result<(), Failure> {
    if let Some(why) = &arguments.correction {
        study.log_correction(why)?;
        return Ok(());
    }
    match (data, last_run(study.state())) {
        (Some(data), Some(last)) if data.hash() != last.data => Err(uncorrected(&last, "other data")),
        _ => Ok(()),
    }
}

/// What the last run read.
struct LastRun {
    record: u32,
    data: Digest,
    allocation: Option<Digest>,
}

fn last_run(state: &StudyState) -> Option<LastRun> {
    state.runs().last().and_then(|event| match &event.what {
        Happening::Run { data, allocation, record, .. } => Some(LastRun { record: *record, data: *data, allocation: *allocation }),
        _ => None,
    })
}

fn uncorrected(last: &LastRun, what: &str) -> Failure {
    Failure::other(
        format!("record {:03} exists; another run on {what} is a correction", last.record),
        "say what was corrected with `--correction WHY`: the report then sets today's conclusion beside the first one",
    )
}

/// Reads a file while it is hashed and kept.
fn take_in<T>(
    terminal: &Terminal<'_>,
    incoming: Incoming,
    path: &Path,
    read: impl FnOnce(&str, &mut (dyn Read + Send)) -> Result<T, Vec<Diagnostic>>,
) -> Result<(Result<T, Vec<Diagnostic>>, Received), Failure> {
    let source = progress(terminal, path, files::open(terminal, path)?);
    let mut reading = incoming.reading(path, source);
    let found = read(&path.display().to_string(), &mut reading);
    Ok((found, reading.finish()?))
}

/// Shows how far a file has been read, once that takes more than a second and someone is looking.
pub(super) fn progress<'t>(terminal: &Terminal<'t>, path: &Path, source: Box<dyn Read + Send>) -> Box<dyn Read + Send + 't> {
    let size = match terminal.world.kind(path, Links::Follow) {
        Ok(Kind::File(size)) if terminal.world.stderr_is_terminal() => size,
        _ => return source,
    };
    let bar = ProgressBar::with_draw_target(Some(size), ProgressDrawTarget::hidden());
    if let Ok(style) = ProgressStyle::with_template("reading {msg} {bar:30} {bytes} of {total_bytes}, {eta} left") {
        bar.set_style(style);
    }
    bar.set_message(path.display().to_string());
    Box::new(Watched { source, bar, world: terminal.world, started: terminal.world.now(), shown: false })
}

/// Shows which step is being carried out, once that takes more than a second and someone is looking.
fn watched<T>(terminal: &Terminal<'_>, work: impl FnOnce(&mut dyn FnMut(&str)) -> T) -> T {
    if !terminal.world.stderr_is_terminal() {
        return work(&mut |_| {});
    }
    let bar = ProgressBar::with_draw_target(None, ProgressDrawTarget::hidden());
    let (finished, waiting) = mpsc::channel::<()>();
    std::thread::scope(|scope| {
        let shown = bar.clone();
        scope.spawn(move || {
            let second = Duration::from_secs(QUIET_SECONDS.unsigned_abs());
            if waiting.recv_timeout(second) == Err(mpsc::RecvTimeoutError::Timeout) {
                shown.set_draw_target(ProgressDrawTarget::stderr());
                while waiting.recv_timeout(Duration::from_millis(200)) == Err(mpsc::RecvTimeoutError::Timeout) {
                    shown.tick();
                }
                shown.finish_and_clear();
            }
        });
        let found = work(&mut |step| bar.set_message(format!("carrying out {step}")));
        drop(finished);
        found
    })
}

struct Watched<'w> {
    source: Box<dyn Read + Send>,
    bar: ProgressBar,
    world: &'w dyn crate::world::World,
    started: jiff::Timestamp,
    shown: bool,
}

impl Read for Watched<'_> {
    fn read(&mut self, buffer: &mut [u8]) -> io::Result<usize> {
        let length = self.source.read(buffer)?;
        self.bar.inc(length as u64);
        if !self.shown && self.world.now().as_second() - self.started.as_second() > QUIET_SECONDS {
            self.shown = true;
            self.bar.set_draw_target(ProgressDrawTarget::stderr());
        }
        if length == 0 {
            self.bar.finish_and_clear();
        }
        Ok(length)
    }
}

/// The short account of a run.
fn tell(terminal: &Terminal<'_>, arguments: &RunArguments, results: &crate::results::Results, record: u32, head: &str) {
    let mut text = format!(
        "{} subjects in the data, {} analysed{}\n\n",
        results.data.subjects,
        results.data.used,
        match results.data.left_out.len() {
            0 => String::new(),
            count => format!(", {count} left out"),
        }
    );
    for step in &results.steps {
        let state = match step.state {
            crate::results::State::Done => step.verdict.clone().unwrap_or_else(|| "done".to_owned()),
            crate::results::State::NotRun => "not run".to_owned(),
            crate::results::State::Refused => "refused".to_owned(),
        };
        text.push_str(&format!("  {}: {state}\n", step.id));
        for entry in step.results.iter().filter(|_| step.results.len() > 1 && step.species == "test") {
            text.push_str(&format!("    {}: {}\n", entry.label, entry.verdict.as_deref().unwrap_or("-")));
        }
        if let Some(because) = &step.because {
            text.push_str(&format!("    because {because}\n"));
        }
    }
    text.push_str(&format!("\n{}\n", results.conclusion.text));
    for verdict in &results.conclusion.not_named {
        text.push_str(&format!("  also: {} is {}\n", verdict.reference, verdict.verdict));
    }
    let folder = arguments.study.display();
    text.push_str(&format!("\nreport       {folder}/records/{record:03}/report.html\nledger head  {head}\n"));
    terminal.answer(&text);
}
