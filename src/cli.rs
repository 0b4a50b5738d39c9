//! The command line: arguments, commands, exit codes. stdout carries the result, stderr the talk.

mod args;
mod commands;
mod failure;
mod out;
mod table;

pub use failure::Failure;

use clap::Parser;
use std::process::ExitCode;

/// Runs the program on the arguments of this process.
pub fn run() -> ExitCode {
    let args = match args::Args::try_parse() {
        Ok(args) => args,
        Err(e) => {
            // Help and version are results; anything else is talk about a wrong call.
            let code = if e.use_stderr() { 2 } else { 0 };
            drop(e.print());
            return ExitCode::from(code);
        }
    };
    match commands::run(args) {
        Ok(code) => code,
        Err(failure) => {
            out::talk(&failure.to_string());
            ExitCode::from(failure.code)
        }
    }
}
