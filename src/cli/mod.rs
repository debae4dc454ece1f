//! The commands: arguments in, exit status out. Results go to standard output, progress and errors to standard error.
//!
//! Exit status 0: every criterion is met. 1: a criterion is not met or not shown. 2: an input cannot be used.

mod issue;
mod part;
mod press;
mod progress;
mod redline;
mod show;
mod start;
mod verify;
mod where_used;

use std::ffi::OsString;
use std::io::Write;
use std::num::NonZeroUsize;
use std::path::PathBuf;

use clap::{Args, Parser, Subcommand};

use crate::notebook::Calculation;

/// Every criterion is met.
pub const MET: u8 = 0;
/// A criterion is not met or not shown.
pub const NOT_MET: u8 = 1;
/// An input cannot be used.
pub const UNUSABLE: u8 = 2;

/// Where a command writes.
pub struct Console<'a> {
    /// Results.
    pub out: &'a mut dyn Write,
    /// Progress and errors.
    pub err: &'a mut dyn Write,
    /// `err` is a terminal that somebody watches: a progress bar is drawn there.
    pub watched: bool,
}

/// What the commands work with.
pub struct House<'a> {
    pub calculation: Calculation<'a>,
    /// This program as a file, to typeset a notebook's own templates in a process with a time limit.
    pub program: Option<PathBuf>,
}

const STATUSES: &str = "\
Exit status: 0 if every criterion is met, 1 if one is not met or not shown, 2 if an input cannot be used.";

#[derive(Parser)]
#[command(name = "qsheaf", version, after_help = STATUSES, disable_help_subcommand = true)]
/// Makes design notes for circuits of discrete bipolar transistors from a notebook of worksheets.
struct Arguments {
    #[command(subcommand)]
    command: Command,
}

#[derive(Subcommand)]
enum Command {
    /// Recalculate what is out of date and issue it as PDF, with its findings, into issued/.
    Issue(IssueArguments),
    /// Recalculate every note and print its verdicts; write nothing.
    Verify(VerifyArguments),
    /// List the worksheets and reference designators that use a part.
    WhereUsed(WhereUsedArguments),
    /// Recalculate and print what moved since the last issue of each note.
    Redline(RedlineArguments),
    /// Print a part record, the model fitted to it, and how well it keeps each row.
    Part(PartArguments),
    /// Make a new notebook that can be issued at once.
    Start(StartArguments),
    /// Typeset one note: its sources come from standard input, the PDF goes to standard output.
    #[command(hide = true, name = press::COMMAND)]
    Press,
}

#[derive(Args)]
struct Folder {
    /// The notebook: a folder with a notebook.yaml; otherwise the notebook `worksheets`, or the folder here.
    #[arg(value_name = "DIR")]
    folder: Option<PathBuf>,
}

impl Folder {
    fn path(&self) -> PathBuf {
        self.folder.clone().unwrap_or_else(here)
    }
}

/// The notebook that is meant where none is named: `worksheets`, if it is one, or the current folder.
fn here() -> PathBuf {
    let usual = PathBuf::from("worksheets");
    if usual.join(crate::settings::FILE).is_file() { usual } else { PathBuf::from(".") }
}

#[derive(Args)]
struct Workers {
    /// How many notes are worked on at once; as many as there are processors otherwise.
    #[arg(long, value_name = "N")]
    workers: Option<NonZeroUsize>,
}

impl Workers {
    fn number(&self) -> usize {
        let all = || std::thread::available_parallelism().map_or(1, NonZeroUsize::get);
        self.workers.map_or_else(all, NonZeroUsize::get)
    }
}

#[derive(Args)]
struct IssueArguments {
    #[command(flatten)]
    folder: Folder,
    #[command(flatten)]
    workers: Workers,
    /// Date of issue to print, year-month-day, instead of the date in each worksheet's head.
    #[arg(long, value_name = "DATE", value_parser = date)]
    date: Option<String>,
    /// Print what was done as JSON.
    #[arg(long)]
    json: bool,
}

#[derive(Args)]
struct VerifyArguments {
    #[command(flatten)]
    folder: Folder,
    #[command(flatten)]
    workers: Workers,
    /// Print the verdicts as JSON, numbers in SI units.
    #[arg(long)]
    json: bool,
}

#[derive(Args)]
struct WhereUsedArguments {
    /// Name of a part record.
    #[arg(value_name = "PART")]
    part: String,
    #[command(flatten)]
    folder: Folder,
    /// Print the uses as JSON.
    #[arg(long)]
    json: bool,
}

#[derive(Args)]
struct RedlineArguments {
    /// Number of a note, or the notebook's folder to see all its notes.
    #[arg(value_name = "NOTE")]
    note: Option<String>,
    /// The notebook of that note; otherwise the notebook `worksheets`, or the folder here.
    #[arg(value_name = "DIR")]
    folder: Option<PathBuf>,
    #[command(flatten)]
    workers: Workers,
    /// Print what moved as JSON, numbers in SI units.
    #[arg(long)]
    json: bool,
}

#[derive(Args)]
struct PartArguments {
    /// Name of a part record.
    #[arg(value_name = "NAME")]
    name: String,
    #[command(flatten)]
    folder: Folder,
}

#[derive(Args)]
struct StartArguments {
    /// The folder to make; one that exists must be empty.
    #[arg(value_name = "DIR")]
    folder: PathBuf,
}

fn date(text: &str) -> Result<String, String> {
    if crate::worksheet::is_date(text) {
        Ok(text.to_owned())
    } else {
        Err("expected a date of the calendar as year-month-day, such as 2026-01-31".to_owned())
    }
}

/// Runs the command that `arguments` (the program's name first) ask for and returns its exit status.
pub fn run(arguments: impl IntoIterator<Item = OsString>, house: &House, console: &mut Console) -> u8 {
    let arguments = match Arguments::try_parse_from(arguments) {
        Ok(arguments) => arguments,
        Err(message) => {
            let to: &mut dyn Write = if message.use_stderr() { console.err } else { console.out };
            // A closed pipe is the reader's wish to see no more.
            let _ = write!(to, "{}", message.render());
            return if message.use_stderr() { UNUSABLE } else { MET };
        }
    };
    match arguments.command {
        Command::Issue(arguments) => issue::run(&arguments, house, console),
        Command::Verify(arguments) => verify::run(&arguments, house, console),
        Command::WhereUsed(arguments) => where_used::run(&arguments, console),
        Command::Redline(arguments) => redline::run(&arguments, house, console),
        Command::Part(arguments) => part::run(&arguments, console),
        Command::Start(arguments) => start::run(&arguments, console),
        Command::Press => press::serve(console),
    }
}
