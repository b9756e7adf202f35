//! The general-purpose libraries: a Python process that times what it is told by name.

use std::io::{BufRead, BufReader, Write};
use std::path::{Path, PathBuf};
use std::process::{Child, ChildStdin, ChildStdout, Command, Stdio};

use anyhow::{Context, bail, ensure};

/// The process; it ends when its input does.
pub(crate) struct Library {
    child: Child,
    input: Option<ChildStdin>,
    output: BufReader<ChildStdout>,
}

fn root() -> PathBuf {
    PathBuf::from(env!("CARGO_MANIFEST_DIR"))
}

/// The interpreter with the pinned packages; made the first time, which needs the Python package registry.
fn interpreter() -> anyhow::Result<PathBuf> {
    let status = Command::new(root().join(".ci/reference"))
        .arg("--environment")
        .stdout(Stdio::null())
        .status();
    let told = "the contestants need Python 3.11 or later with venv and its package registry: see .ci/reference";
    ensure!(status.context(told)?.success(), "{told}");
    Ok(root().join("target/reference/bin/python"))
}

impl Library {
    pub(crate) fn start() -> anyhow::Result<Self> {
        let script = Path::new("tests/bench/estimation/library.py");
        let mut child = Command::new(interpreter()?)
            .arg(root().join(script))
            .arg(root().join("fixtures/reference"))
            .stdin(Stdio::piped())
            .stdout(Stdio::piped())
            .spawn()
            .context("starting the Python process")?;
        let output = BufReader::new(child.stdout.take().context("its output")?);
        let input = child.stdin.take();
        Ok(Self {
            child,
            input,
            output,
        })
    }

    fn ask(&mut self, question: &str) -> anyhow::Result<String> {
        let input = self.input.as_mut().context("its input")?;
        writeln!(input, "{question}").context("the Python process ended")?;
        let mut answer = String::new();
        self.output.read_line(&mut answer)?;
        if answer.is_empty() {
            bail!("the Python process ended at '{question}'");
        }
        Ok(answer.trim().to_owned())
    }

    /// Versions, and what their linear algebra runs on.
    pub(crate) fn describe(&mut self) -> anyhow::Result<String> {
        self.ask("describe")
    }

    /// Seconds that a contestant takes once, scaled to the whole work.
    pub(crate) fn time(&mut self, contestant: &str) -> anyhow::Result<f64> {
        let answer = self.ask(contestant)?;
        answer
            .parse()
            .with_context(|| format!("'{contestant}' answered '{answer}'"))
    }
}

impl Drop for Library {
    fn drop(&mut self) {
        self.input = None;
        // It has no more input; how it ends concerns nobody.
        let _ = self.child.wait();
    }
}
