//! The kernel as front ends meet it: what `tests/front_ends` says to it, and what came of it.

use std::process::Command;
use std::sync::Mutex;

use crate::front_ends::{folder, front_end_python};
use crate::python_environment::printed;

/// Run one of the scripts on the program; it fails where a check of its does.
fn hold(script: &str) {
    // They measure time, and would disturb each other.
    static RUNNING: Mutex<()> = Mutex::new(());
    let python = front_end_python();
    let _running = RUNNING.lock();
    let said = printed(
        Command::new(python)
            .env("PYTHONDONTWRITEBYTECODE", "1")
            .arg(folder().join(script))
            .arg(env!("CARGO_BIN_EXE_rhythmite")),
    );
    match said {
        Ok(said) => assert!(said.contains(" passed, 0 failed"), "{said}"),
        Err(failures) => panic!("{failures}"),
    }
}

#[test]
fn the_kernel_passes_the_tests_that_jupyter_has_for_kernels() {
    hold("conformance.py");
}

#[test]
fn the_kernel_keeps_to_the_protocol() {
    hold("protocol.py");
}

#[test]
fn a_notebook_is_refreshed_in_place_or_says_what_is_not() {
    hold("refreshing.py");
}

#[test]
fn nothing_that_is_sent_stops_the_kernel_and_nothing_is_left_when_it_ends() {
    hold("hostile.py");
}

#[test]
fn the_demo_runs_in_batch_runners_converters_and_the_console() {
    hold("batch.py");
}

#[test]
#[ignore = "an interrupt is heard late while a file is read and while a long series is drawn"]
fn an_interrupt_ends_any_work_at_once() {
    hold("interrupts.py");
}
