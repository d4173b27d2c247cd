//! The program `ropewalk`: reads the command line, runs one command, sets the exit code.

mod args;
mod commands;
mod console;
mod exit;
mod flags;
mod inspect;
mod settle;
mod track;

use std::process::ExitCode;

use clap::Parser;

fn main() -> ExitCode {
    let args = match args::Args::try_parse() {
        Ok(args) => args,
        Err(e) => return console::usage(&e),
    };
    match commands::run(&args) {
        Ok(code) => code,
        Err(e) => {
            console::error(&e, args.progress());
            exit::code(&e)
        }
    }
}
