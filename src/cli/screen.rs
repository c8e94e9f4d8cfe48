//! What the user sees: answers on standard output, faults on standard error. A reader who closes the
//! pipe has seen enough; that is no error.

use crate::cli::{DONE, UNREADABLE, WRONG};
use crate::diagnostics::render::{self, Look};
use crate::diagnostics::{Cause, Faults};
use std::io::{self, ErrorKind, Write};
use std::panic::PanicHookInfo;

/// Standard output, until it is closed.
pub struct Screen {
    quiet: bool,
    closed: bool,
    /// A failure other than a closed pipe, e.g. a full disk behind a redirection.
    failed: Option<ErrorKind>,
}

impl Screen {
    pub fn new(quiet: bool) -> Screen {
        Screen { quiet, closed: false, failed: None }
    }

    /// One line on standard output. Control characters, which may come from data, are shown as signs, so
    /// that no name can write over the screen.
    pub fn say(&mut self, line: &str) {
        if self.quiet || self.closed {
            return;
        }
        let mut line: String =
            line.chars().map(|c| if c.is_control() { char::REPLACEMENT_CHARACTER } else { c }).collect();
        line.truncate(line.trim_end().len());
        line.push('\n');
        if let Err(error) = io::stdout().lock().write_all(line.as_bytes()) {
            self.end_with(&error);
        }
    }

    /// All faults on standard error; the exit status that belongs to them.
    pub fn faults(&mut self, faults: &Faults) -> u8 {
        let look = Look { colour: true, ..Look::default() };
        // Colour is taken out where standard error is no terminal or NO_COLOR is set. A standard error
        // that cannot be written to leaves the exit status.
        let _ = anstream::stderr().write_all(render::render(faults, look).as_bytes());
        let wrong = faults.0.iter().any(|fault| fault.cause == Cause::Wrong);
        if wrong { WRONG } else { UNREADABLE }
    }

    /// A line on standard error beside the answers.
    pub fn remark(&mut self, line: &str) {
        let _ = writeln!(io::stderr().lock(), "{line}");
    }

    /// Flushes; the exit status of printing itself.
    pub fn end(&mut self) -> u8 {
        if !self.closed
            && let Err(error) = io::stdout().lock().flush()
        {
            self.end_with(&error);
        }
        match self.failed {
            None => DONE,
            Some(kind) => {
                self.remark(&format!("error: writing to standard output: {kind}"));
                UNREADABLE
            }
        }
    }

    fn end_with(&mut self, error: &io::Error) {
        self.closed = true;
        if error.kind() != ErrorKind::BrokenPipe {
            self.failed = Some(error.kind());
        }
    }
}

/// What is said where the program itself is at fault.
pub fn internal_fault(about: &PanicHookInfo<'_>) {
    let place = about.location().map_or(String::new(), |at| format!(" ({}:{})", at.file(), at.line()));
    let payload = about.payload();
    let text = payload.downcast_ref::<String>().map(String::as_str);
    let what = text.or(payload.downcast_ref::<&str>().copied()).unwrap_or("no words");
    let _ = writeln!(
        io::stderr().lock(),
        "error[internal-fault]: the program broke off: {what}{place}\n\
         This is a fault of the program, not of your files; nothing half-written was left. Please report it with the spec."
    );
}
