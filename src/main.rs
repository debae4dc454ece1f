//! The door: arguments in, exit status out.

use std::io::{IsTerminal, stderr, stdout};
use std::process::ExitCode;

use qsheaf::cli::{Console, House, run};
use qsheaf::notebook::Calculation;
use qsheaf::study::study;

fn main() -> ExitCode {
    let house = House {
        calculation: Calculation { program: env!("CARGO_PKG_VERSION"), study: &study },
        program: std::env::current_exe().ok(),
    };
    let watched = stderr().is_terminal();
    let mut console = Console { out: &mut stdout().lock(), err: &mut stderr(), watched };
    ExitCode::from(run(std::env::args_os(), &house, &mut console))
}
