//! What a person at a terminal meets: arguments, progress, messages, exit codes.

mod args;
mod commands;
mod init;
mod progress;
mod render;
mod thin;
mod write;

use std::process::ExitCode;

use clap::Parser;

use args::{Arguments, Command};
use render::Voice;

/// Exit code after an interruption.
const INTERRUPTED: i32 = 130;

/// Reads the arguments, runs the command, says what went wrong.
pub fn main() -> ExitCode {
    survive_signals();
    let arguments = match Arguments::try_parse() {
        Ok(arguments) => arguments,
        Err(e) => {
            let code = if e.use_stderr() { 2 } else { 0 };
            drop(e.print());
            return ExitCode::from(code);
        }
    };
    let voice = Voice::new(arguments.common.color, arguments.common.quiet);
    std::panic::set_hook(Box::new(move |info| voice.defect(&info.to_string())));
    let outcome = std::panic::catch_unwind(|| run(&arguments, voice));
    match outcome {
        Ok(Ok(())) => ExitCode::SUCCESS,
        Ok(Err(problems)) => {
            problems.0.iter().for_each(|p| voice.error(p));
            ExitCode::from(problems.exit_code())
        }
        Err(_) => {
            trodden::gate::clear_staging();
            ExitCode::from(1)
        }
    }
}

fn run(arguments: &Arguments, voice: Voice) -> trodden::diag::Outcome<()> {
    if let Some(threads) = arguments.common.threads {
        // fails only when a pool exists already, which is not so this early
        drop(rayon::ThreadPoolBuilder::new().num_threads(threads.get()).build_global());
    }
    match &arguments.command {
        Command::Init(a) => init::init(a, &arguments.common, voice),
        Command::Check(a) => commands::check(a, &arguments.common, voice),
        Command::Build(a) => commands::build(a, &arguments.common, voice),
        Command::Thin(a) => thin::thin(a, &arguments.common, voice),
        Command::Compare(a) => commands::compare(a, &arguments.common, voice),
    }
}

/// An interruption clears unfinished outputs and ends with its own code; a file grown beyond the
/// shell's limit is an error of writing, not a death.
fn survive_signals() {
    // SAFETY: ignoring a signal touches no memory
    unsafe { libc::signal(libc::SIGXFSZ, libc::SIG_IGN) };
    drop(ctrlc::set_handler(|| {
        trodden::gate::clear_staging();
        // SAFETY: ends the process at once; the destructors of C++ libraries must not run while another
        // thread is still at work in them
        unsafe { libc::_exit(INTERRUPTED) };
    }));
}
