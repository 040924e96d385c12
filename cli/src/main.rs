//! The `backlit` program: one file a command, each of which reads, calls the libraries and prints.
//!
//! Data go to standard output, all else to standard error. Exit codes: 0 done, 1 done and the answer is no, 2 the input or
//! the command line is wrong, 130 interrupted. Nothing here computes physics.

// The doc comments of arguments are help texts: brackets in them are what a user types.
#![allow(rustdoc::broken_intra_doc_links, rustdoc::invalid_html_tags)]

mod arguments;
mod clouds;
mod console;
mod failure;
mod fit;
mod flags;
mod grid;
mod identify;
mod identify_plot;
mod interrupt;
mod limits;
mod map;
mod noise;
mod observed;
mod output;
mod predict;
mod progress;
mod range;
mod species;
mod tile_fit;
mod vary;

use std::process::ExitCode;

use clap::Parser;

use arguments::{Arguments, Command};
use console::Console;
use failure::Failure;

#[link(name = "openblas")]
unsafe extern "C" {
    /// Sets the number of threads that OpenBLAS uses; any positive number is allowed at any time.
    safe fn openblas_set_num_threads(threads: std::ffi::c_int);
}

fn main() -> ExitCode {
    let arguments = Arguments::parse();
    // Every core fits pixels of its own; threads of the linear algebra below them would only get in the way.
    openblas_set_num_threads(1);
    let console = Console::new(arguments.json, arguments.quiet);
    match run(&arguments, &console) {
        Ok(()) => ExitCode::SUCCESS,
        // The reader of a pipe has what it wanted (`backlit species | head`).
        Err(Failure::PipeClosed) => ExitCode::SUCCESS,
        Err(failure) => {
            console.failure(&failure);
            failure.exit_code()
        }
    }
}

fn run(arguments: &Arguments, console: &Console) -> Result<(), Failure> {
    let pool = rayon::ThreadPoolBuilder::new()
        .num_threads(arguments.threads.map_or(0, |n| usize::from(n.get())))
        .build()
        .map_err(|source| Failure::Threads { source })?;
    match &arguments.command {
        Command::Species(command) => command.run(console),
        Command::Predict(command) => pool.install(|| command.run(console)),
        Command::Fit(command) => command.run(console),
        Command::Identify(command) => command.run(console),
        Command::Limits(command) => command.run(console),
        Command::Map(command) => command.run(console, &pool),
    }
}
