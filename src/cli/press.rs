//! Typesetting. What the program's own templates ask for is typeset here; a notebook's templates are code that did not
//! ship with the program, and the typesetter has no limit of its own: they are given a process with a time limit.

use std::io::{Read, Write};
use std::path::Path;
use std::process::{Child, Command, Stdio};
use std::time::{Duration, Instant};

use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::redline::Moves;
use crate::report::{self, Issue, Sources};
use crate::source::Bundle;
use crate::study::Findings;

use super::{Console, MET, UNUSABLE};

/// The hidden command that typesets what comes from standard input.
pub(super) const COMMAND: &str = "typeset-sources";
/// How long one note may take with templates of a notebook.
const LIMIT: Duration = Duration::from_secs(60);
/// How often a process is asked whether it has ended.
const PAUSE: Duration = Duration::from_millis(4);

/// Findings -> PDF; `program` is this program as a file.
pub(super) fn typeset(
    program: Option<&Path>,
    findings: &Findings,
    issue: &Issue,
    moves: Option<&Moves>,
    files: &Bundle,
) -> Result<Vec<u8>, Diagnostics> {
    let sources = report::source(findings, issue, moves, files)?;
    if sources.foreign.is_empty() {
        return report::compile(&sources);
    }
    let names = sources.foreign.join(", ");
    let program = program.ok_or_else(|| {
        Diagnostic::bare(format!("{names}: templates of a notebook need a process of their own"))
    })?;
    apart(program, &sources, &names)
}

/// Typesets in another process.
fn apart(program: &Path, sources: &Sources, names: &str) -> Result<Vec<u8>, Diagnostics> {
    let failed = |what: String| Diagnostics::from(Diagnostic::bare(format!("{names}: {what}")));
    let child = Command::new(program)
        .arg(COMMAND)
        .stdin(Stdio::piped())
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn();
    let mut child = child.map_err(|error| failed(format!("no process to typeset in: {error}")))?;
    let input = sources.to_bytes();
    let (stdin, stdout, stderr) = (child.stdin.take(), child.stdout.take(), child.stderr.take());
    let (ended, pdf, said) = std::thread::scope(|scope| {
        // A process that stops reading is told by its exit status.
        scope.spawn(move || stdin.map(|mut to| to.write_all(&input)));
        let pdf = scope.spawn(move || all(stdout));
        let said = scope.spawn(move || all(stderr));
        let ended = wait(&mut child);
        (ended, pdf.join().unwrap_or_default(), said.join().unwrap_or_default())
    });
    match ended {
        None => {
            let limit = LIMIT.as_secs();
            Err(failed(format!("typesetting was stopped after {limit} seconds"))).map_err(
                |mut error: Diagnostics| {
                    if let Some(first) = error.0.first_mut() {
                        first.expected = Some("templates that come to an end".to_owned());
                    }
                    error
                },
            )
        }
        Some(true) => Ok(pdf),
        Some(false) => Err(serde_json::from_slice(&said).unwrap_or_else(|_| {
            failed(format!("typesetting broke down: {}", String::from_utf8_lossy(&said).trim()))
        })),
    }
}

fn all(from: Option<impl Read>) -> Vec<u8> {
    let mut bytes = Vec::new();
    // What a process wrote before it ended is all there is.
    let _ = from.map(|mut from| from.read_to_end(&mut bytes));
    bytes
}

/// Whether the process ended well; `None` if it had to be stopped.
fn wait(child: &mut Child) -> Option<bool> {
    let begin = Instant::now();
    while begin.elapsed() < LIMIT {
        match child.try_wait() {
            Ok(Some(status)) => return Some(status.success()),
            Ok(None) => std::thread::sleep(PAUSE),
            Err(_) => break,
        }
    }
    let _ = child.kill();
    let _ = child.wait();
    None
}

/// The other side: sources from standard input, PDF to standard output, errors as JSON to standard error.
pub(super) fn serve(console: &mut Console) -> u8 {
    let mut bytes = Vec::new();
    let read = std::io::stdin().lock().read_to_end(&mut bytes);
    let result = match read.ok().and_then(|_| Sources::from_bytes(&bytes)) {
        Some(sources) => report::compile(&sources),
        None => Err(Diagnostic::bare("standard input holds no sources of a note").into()),
    };
    let written = match &result {
        Ok(pdf) => console.out.write_all(pdf).and_then(|()| console.out.flush()),
        Err(errors) => writeln!(console.err, "{}", serde_json::json!(errors)),
    };
    if result.is_ok() && written.is_ok() { MET } else { UNUSABLE }
}
