//! The command line as a whole: what holds for every command.

use std::num::NonZeroU16;

use clap::{Parser, Subcommand};

/// Temperatures, columns, motion and background of thin gas seen against a continuum source.
#[derive(Debug, Parser)]
#[command(
    name = "backlit",
    version,
    arg_required_else_help = true,
    max_term_width = 80
)]
pub struct Arguments {
    /// One JSON document on standard output
    #[arg(long, global = true, help_heading = "Everywhere")]
    pub json: bool,

    /// No progress and no notes on standard error
    #[arg(long, short, global = true, help_heading = "Everywhere")]
    pub quiet: bool,

    /// Number of threads [default: one a core]
    #[arg(long, global = true, value_name = "N", help_heading = "Everywhere")]
    pub threads: Option<NonZeroU16>,

    /// What to do.
    #[command(subcommand)]
    pub command: Command,
}

/// The commands, one file each; the help of each stands there.
#[derive(Debug, Subcommand)]
pub enum Command {
    Species(crate::species::Species),
    Predict(crate::predict::Predict),
    Identify(crate::identify::Identify),
    Fit(crate::fit::Fit),
    Map(crate::map::Map),
    Limits(crate::limits::Limits),
}

#[cfg(test)]
mod tests {
    use super::*;
    use clap::CommandFactory;

    #[test]
    fn the_command_line_is_consistent() {
        Arguments::command().debug_assert();
    }

    #[test]
    fn every_option_has_a_short_help_that_fits_on_one_line() {
        let mut root = Arguments::command();
        root.build();
        for command in root.get_subcommands() {
            for argument in command.get_arguments() {
                let help = argument
                    .get_help()
                    .map(ToString::to_string)
                    .unwrap_or_default();
                assert!(
                    !help.is_empty(),
                    "{} {}",
                    command.get_name(),
                    argument.get_id()
                );
                assert!(help.chars().count() < 80, "{}: {help}", argument.get_id());
            }
        }
    }
}
