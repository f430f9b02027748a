//! The program: parse, call, print, exit code.

mod cli;

use asleft::archive;
use asleft::notice::Problem;
use asleft::report::{NOTHING_DONE, Progress, Report, Stopped};
use clap::Parser;
use cli::{Cli, Command};
use std::io::{self, IsTerminal, Write};
use std::process::ExitCode;

fn main() -> ExitCode {
    hush_guarded_panics();
    let cli = Cli::parse();
    match run(&cli) {
        Ok(code) => ExitCode::from(code),
        // Who reads the output has read enough (`asleft check JOB | head`).
        Err(error) if error.kind() == io::ErrorKind::BrokenPipe => ExitCode::SUCCESS,
        Err(error) => {
            // Where standard error is gone too there is nobody left to tell.
            let _ = writeln!(io::stderr().lock(), "error: the output: {error}");
            ExitCode::from(NOTHING_DONE)
        }
    }
}

/// Panics that the library catches are told as problems of the file that caused them; nothing else of
/// them is printed.
fn hush_guarded_panics() {
    let usual = std::panic::take_hook();
    std::panic::set_hook(Box::new(move |panic| {
        if !asleft::read::is_guarded() {
            usual(panic);
        }
    }));
}

/// Does what was asked and prints it; the exit code.
fn run(cli: &Cli) -> io::Result<u8> {
    match &cli.command {
        Command::New { folder } => say(cli, asleft::new_job(folder)),
        Command::Inspect { logs, tag, job } => {
            say(cli, asleft::inspect(logs, tag.as_deref(), job.as_deref()))
        }
        Command::Check { job, loops } => say(cli, asleft::check(job, loops)),
        Command::Record {
            job,
            loops,
            out,
            no_dossier,
        } => {
            let options = asleft::RecordOptions {
                only: loops.clone(),
                out: out.clone(),
                dossier: !no_dossier,
            };
            let mut line = ProgressLine::new(cli);
            let outcome = asleft::record(job, &options, &mut |progress| line.show(&progress));
            line.clear();
            say(cli, outcome)
        }
        Command::Plan {
            job,
            loops,
            out,
            records,
        } => {
            let options = asleft::PlanOptions {
                only: loops.clone(),
                out: out.clone(),
                records: records.clone(),
            };
            let mut line = ProgressLine::new(cli);
            let outcome = asleft::plan_sheets(job, &options, &mut |progress| line.show(&progress));
            line.clear();
            say(cli, outcome)
        }
        Command::Schema => {
            io::stdout()
                .lock()
                .write_all(archive::schema_text().as_bytes())?;
            Ok(0)
        }
    }
}

/// Prints a report, or what stopped it. Text goes to standard output; what stopped a command, and
/// what is said in spite of `--quiet`, to standard error.
fn say<T: Report>(cli: &Cli, outcome: Result<T, Vec<Problem>>) -> io::Result<u8> {
    match outcome {
        Ok(report) => print(cli, &report),
        Err(problems) => print_stopped(cli, &Stopped { problems }),
    }
}

fn print<T: Report>(cli: &Cli, report: &T) -> io::Result<u8> {
    if cli.json {
        print_json(report)?;
    } else if !cli.quiet {
        write!(io::stdout().lock(), "{report}")?;
    } else if let Some(failures) = report.failures() {
        write!(io::stderr().lock(), "{failures}")?;
    }
    Ok(report.exit_code())
}

fn print_stopped(cli: &Cli, stopped: &Stopped) -> io::Result<u8> {
    if cli.json {
        print_json(stopped)?;
    } else {
        write!(io::stderr().lock(), "{stopped}")?;
    }
    Ok(stopped.exit_code())
}

fn print_json<T: Report>(report: &T) -> io::Result<()> {
    io::stdout()
        .lock()
        .write_all(archive::json_text(report).as_bytes())
}

/// One line on standard error that says how far the run has come; only where a person watches.
struct ProgressLine {
    watched: bool,
}

impl ProgressLine {
    fn new(cli: &Cli) -> Self {
        ProgressLine {
            watched: !cli.quiet && io::stderr().is_terminal(),
        }
    }

    fn show(&mut self, progress: &Progress) {
        if self.watched {
            let Progress { done, of, now } = progress;
            self.write(&format!("{done} of {of} done, now {now}"));
        }
    }

    fn clear(&mut self) {
        if self.watched {
            self.write("");
        }
    }

    /// Writes over the line; a terminal that cannot be written to stops no run.
    fn write(&mut self, text: &str) {
        // Back to the first column and clear to the end of the line (ECMA-48: CR, EL).
        let mut terminal = io::stderr().lock();
        let _ = write!(terminal, "\r\x1b[K{text}").and_then(|()| terminal.flush());
    }
}
