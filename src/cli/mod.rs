//! The command line: one file per command. Arguments as typed are turned into one call each.

mod audit;
mod check;
mod demo;
mod files;
mod output;
mod run;
mod seal;

use crate::world::World;
use clap::{Args, Parser, Subcommand, ValueEnum};
use output::Terminal;
use std::path::PathBuf;

/// Done, and nothing wrong.
const DONE: u8 = 0;

#[derive(Debug, Parser)]
#[command(
    name = "aforesaid",
    version,
    about = "Fixes the follow-up of an arm-by-occasion interaction before unblinding, runs it, reports it, and lets anyone audit it.",
    after_help = "A study goes: write a plan; `check` it; `seal` it; give the seal's hash to someone outside; `check --data` when the data are in; `run`; `audit`.\n\
                  `aforesaid demo DIR` shows all of it on invented data.\n\n\
                  Exit status: 0 done and nothing wrong; 1 the plan, data or record has an error or a warning that nobody acknowledged; 2 wrong usage; \
                  3 the machine failed (disk full, no permission, folder held by another command).\n\n\
                  Aforesaid supports a qualified statistician, an ethics committee and a regulator; it replaces none of them."
)]
struct Arguments {
    #[command(subcommand)]
    command: Command,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq, ValueEnum)]
enum Format {
    /// For people.
    Text,
    /// For programs.
    Json,
}

#[derive(Debug, Subcommand)]
enum Command {
    /// Compiles a plan, or checks data against a sealed plan without looking at any outcome by arm
    #[command(
        after_help = "Examples:\n  aforesaid check plan.yaml\n  aforesaid check plan.yaml --tests\n  aforesaid check study --data visits.csv --allocation allocation.csv\n\n\
                            With --data the arms stay closed: of the allocation only the identifiers are read, and the output is the same however the arms were dealt."
    )]
    Check(CheckArguments),
    /// Fixes a plan: makes the study folder with the plan, its meaning and their hashes
    #[command(
        after_help = "Example:\n  aforesaid seal plan.yaml --study study\n\nThe plan must have no error and no warning that it does not acknowledge. Give the printed hash to someone outside: \
                            only then does it prove when the plan was fixed."
    )]
    Seal(SealArguments),
    /// Executes the sealed plan on the data and writes a record with its report
    #[command(
        after_help = "Examples:\n  aforesaid run study --data visits.csv --allocation allocation.csv\n  aforesaid run study --data visits-2.csv --allocation allocation.csv --correction \"score of W014 at week 6 was typed wrong\"\n\n\
                            The arms are opened only after that is written in the ledger. Nothing that exists is overwritten: each run is a record of its own."
    )]
    Run(RunArguments),
    /// Verifies a study folder from its bytes: compiles, executes and renders again, and compares
    #[command(
        after_help = "Example:\n  aforesaid audit study --expect-head 5f2c...\n\nIt writes nothing and needs no network. It ends in a table: claim, how it was checked, outcome, where. Exit status 0 only if none failed."
    )]
    Audit(AuditArguments),
    /// A worked study on invented data, by the commands above, each printed before it runs
    #[command(
        after_help = "Example:\n  aforesaid demo wrist-study\n\nMakes the study folder DIR, and beside it DIR-inputs with the plan, the data and the allocation that it starts from."
    )]
    Demo(DemoArguments),
}

#[derive(Debug, Args)]
struct CheckArguments {
    /// A plan, or with --data a study folder
    path: PathBuf,
    /// Data to check against the sealed plan
    #[arg(long, value_name = "FILE")]
    data: Option<PathBuf>,
    /// The allocation, of which only the identifiers are read
    #[arg(long, value_name = "FILE", requires = "data")]
    allocation: Option<PathBuf>,
    /// Lists every reference of the plan
    #[arg(long, conflicts_with = "data")]
    tests: bool,
    /// How findings are written
    #[arg(long, value_enum, default_value_t = Format::Text)]
    format: Format,
}

#[derive(Debug, Args)]
struct SealArguments {
    /// The plan
    plan: PathBuf,
    /// The study folder to make
    #[arg(long, value_name = "DIR")]
    study: PathBuf,
    /// How findings are written
    #[arg(long, value_enum, default_value_t = Format::Text)]
    format: Format,
}

#[derive(Debug, Args)]
struct RunArguments {
    /// The study folder
    study: PathBuf,
    /// The data
    #[arg(long, value_name = "FILE")]
    data: PathBuf,
    /// The allocation, where the plan keeps it in a file of its own
    #[arg(long, value_name = "FILE")]
    allocation: Option<PathBuf>,
    /// Why the data are run again: what was corrected
    #[arg(long, value_name = "WHY")]
    correction: Option<String>,
    /// Keeps no copy of data and allocation in the study folder, only their hashes
    #[arg(long)]
    no_data_copy: bool,
    /// How findings are written
    #[arg(long, value_enum, default_value_t = Format::Text)]
    format: Format,
}

#[derive(Debug, Args)]
struct AuditArguments {
    /// The study folder
    study: PathBuf,
    /// The ledger's head as someone outside holds it: finds final events that were cut off
    #[arg(long, value_name = "HASH")]
    expect_head: Option<String>,
    /// How the claims are written
    #[arg(long, value_enum, default_value_t = Format::Text)]
    format: Format,
}

#[derive(Debug, Args)]
struct DemoArguments {
    /// The study folder to make
    dir: PathBuf,
}

/// Carries out a command line (without the program's name) and gives the exit status.
pub fn main(world: &dyn World, arguments: Vec<std::ffi::OsString>) -> u8 {
    let terminal = Terminal::new(world);
    let parsed = match Arguments::try_parse_from(std::iter::once("aforesaid".into()).chain(arguments)) {
        Ok(parsed) => parsed,
        Err(error) => {
            let text = error.render().to_string();
            // Help and version are what was asked for.
            if error.use_stderr() {
                terminal.aside(&text)
            } else {
                terminal.answer(&text)
            };
            return error.exit_code().clamp(0, 255) as u8;
        }
    };
    let (done, format) = match parsed.command {
        Command::Check(arguments) => (check::check(&terminal, &arguments), arguments.format),
        Command::Seal(arguments) => (seal::seal(&terminal, &arguments.plan, &arguments.study), arguments.format),
        Command::Run(arguments) => (run::run(&terminal, &arguments), arguments.format),
        Command::Audit(arguments) => (audit::audit(&terminal, &arguments), arguments.format),
        Command::Demo(arguments) => (demo::demo(&terminal, &arguments.dir), Format::Text),
    };
    let status = match done {
        Ok(status) => status,
        Err(failure) => terminal.fail(failure, format),
    };
    terminal.ended(status)
}
