//! What holds for every command: help, version, wrong command lines, pipes.
#![allow(clippy::unwrap_used)]

mod program;

use std::process::Stdio;

use program::Desk;

#[test]
fn without_arguments_the_help_goes_to_standard_error_with_exit_code_two() {
    let outcome = Desk::new().run(&[]);
    assert_eq!(outcome.code, 2);
    assert_eq!(outcome.stdout, "");
    for command in ["species", "predict", "fit", "map"] {
        assert!(
            outcome.stderr.contains(&format!("\n  {command} ")),
            "{}",
            outcome.stderr
        );
    }
}

#[test]
fn the_help_lists_no_command_that_does_not_exist() {
    let help = Desk::new().run(&["--help"]).done();
    for later in ["check", "export", "report", "view", "batch"] {
        assert!(!help.contains(&format!("\n  {later} ")), "{later}");
    }
}

#[test]
fn the_short_help_keeps_to_eighty_columns() {
    for command in ["species", "predict", "fit", "map"] {
        let help = Desk::new().run(&[command, "-h"]).done();
        for line in help.lines() {
            assert!(line.chars().count() <= 80, "{command}: {line}");
        }
    }
}

#[test]
fn the_version_is_one_line_on_standard_output() {
    let outcome = Desk::new().run(&["--version"]);
    assert_eq!(outcome.code, 0);
    assert!(outcome.stdout.starts_with("backlit "));
    assert_eq!(outcome.stdout.lines().count(), 1);
    assert_eq!(outcome.stderr, "");
}

#[test]
fn a_wrong_command_line_ends_with_two_and_leaves_standard_output_empty() {
    for arguments in [
        &["spezies"][..],
        &["fit", "a.csv"],
        &["map", "c.h5", "--setup", "s.toml"],
        &["species", "--range", "591..588"],
        &["species", "--range", "588"],
        &["species", "--threads", "0"],
        &["predict", "s.toml", "--noise", "-3"],
        &[
            "predict", "s.toml", "--cube", "4", "--vary", "v.csv", "-o", "c.h5",
        ],
        &["predict", "s.toml", "--cube", "4,4"],
        &["predict", "s.toml", "--like", "a.csv", "--step", "1"],
        &[
            "map",
            "c.h5",
            "--setup",
            "s.toml",
            "-o",
            "m.h5",
            "--resume",
            "--overwrite",
        ],
    ] {
        let outcome = Desk::laid().run(arguments);
        assert_eq!(outcome.code, 2, "{arguments:?}");
        assert_eq!(outcome.stdout, "", "{arguments:?}");
        assert!(outcome.stderr.starts_with("error: "), "{}", outcome.stderr);
    }
}

#[test]
fn a_reader_that_leaves_early_is_no_failure() {
    let desk = Desk::new();
    let mut command = desk.command(&["species", "Na I", "--json"]);
    let mut child = command
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn()
        .unwrap();
    drop(child.stdout.take());
    let output = child.wait_with_output().unwrap();
    assert_eq!(output.status.code(), Some(0));
    assert_eq!(String::from_utf8(output.stderr).unwrap(), "");
}
