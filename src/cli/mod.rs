//! The outer face: one file a command. Only here is anything printed, and only from here are files
//! written (by [`crate::stamp::folder`]).

mod answers;
mod audit;
mod check;
mod core;
mod report;
mod screen;

use clap::{Parser, Subcommand};
use screen::Screen;
use std::ffi::OsString;
use std::path::PathBuf;
use std::process::ExitCode;

/// Done.
pub const DONE: u8 = 0;
/// Done, and a `fail` verdict was given, or an audit found a difference.
pub const FOUND: u8 = 1;
/// The spec, the data or the call is wrong.
pub const WRONG: u8 = 2;
/// A file could not be read or written, or a part of an audit could not be done.
pub const UNREADABLE: u8 = 3;

/// Yearly Bayesian review of a measured quantity: from a plain-text spec and data to a stamped report.
#[derive(Debug, Parser)]
#[command(name = "reassay", version, disable_help_subcommand = true, after_help = STATUSES)]
struct Call {
    #[command(subcommand)]
    command: Command,
}

const STATUSES: &str = "Exit status: 0 done; 1 done, and a verdict marked `fail` was given or an audit found a difference;\n\
2 the spec, the data or the call is wrong; 3 a file could not be read or written, or a part of an audit\ncould not be done.";

#[derive(Debug, Subcommand)]
enum Command {
    /// Compute, render and stamp; one folder a review
    Report(ReportCall),
    /// Say everything that is wrong and what will be used; compute nothing
    Check(CheckCall),
    /// Hash again, compute again, render again, compare; say what differs
    Audit(AuditCall),
}

#[derive(Debug, clap::Args)]
struct ReportCall {
    /// The specs, one a review
    #[arg(required = true, value_name = "SPEC")]
    specs: Vec<PathBuf>,
    /// The folder that receives the reviews' folders
    #[arg(long, value_name = "DIR", default_value = "reviews")]
    out: PathBuf,
    /// Threads to compute on; no figure depends on it [default: all processors]
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u16).range(1..=1024))]
    jobs: Option<u16>,
    /// Print nothing but errors
    #[arg(long)]
    quiet: bool,
}

#[derive(Debug, clap::Args)]
struct CheckCall {
    /// The specs, one a review
    #[arg(required = true, value_name = "SPEC")]
    specs: Vec<PathBuf>,
}

#[derive(Debug, clap::Args)]
struct AuditCall {
    /// The reviews' folders
    #[arg(required = true, value_name = "FOLDER")]
    folders: Vec<PathBuf>,
    /// Where the spec lies now, for inputs that are not in the folder (one folder only)
    #[arg(long, value_name = "PATH")]
    spec: Option<PathBuf>,
    /// Threads to compute on [default: all processors]
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u16).range(1..=1024))]
    jobs: Option<u16>,
}

/// The whole program: arguments in (the first is the program's name), exit status out.
pub fn main(arguments: impl IntoIterator<Item = OsString>) -> ExitCode {
    std::panic::set_hook(Box::new(screen::internal_fault));
    // Whatever goes wrong inside, the answer is a message and a status, never a broken-off run.
    let status = std::panic::catch_unwind(std::panic::AssertUnwindSafe(|| run(arguments)));
    ExitCode::from(status.unwrap_or(UNREADABLE))
}

fn run(arguments: impl IntoIterator<Item = OsString>) -> u8 {
    let call = match Call::try_parse_from(arguments) {
        Ok(call) => call,
        Err(answer) => {
            // Help and version go to standard output with status 0; a closed pipe is no trouble.
            let _ = answer.print();
            return u8::try_from(answer.exit_code()).unwrap_or(WRONG);
        }
    };
    let mut screen = Screen::new(matches!(&call.command, Command::Report(call) if call.quiet));
    let status = match &call.command {
        Command::Report(call) => report::run(call, &mut screen),
        Command::Check(call) => check::run(call, &mut screen),
        Command::Audit(call) => audit::run(call, &mut screen),
    };
    status.unwrap_or_else(|faults| screen.faults(&faults)).max(screen.end())
}

/// The number of threads: as asked, else as many as there are processors.
fn jobs(asked: Option<u16>) -> usize {
    match asked {
        Some(jobs) => usize::from(jobs),
        None => std::thread::available_parallelism().map_or(1, usize::from),
    }
}
