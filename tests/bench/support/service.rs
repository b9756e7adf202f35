//! The service as users run it: its own process, release build, private cluster, shipped settings.

use std::fs;
use std::io::{Read, Write};
use std::net::{Ipv4Addr, SocketAddr, TcpListener, TcpStream};
use std::path::PathBuf;
use std::process::{Child, Command, Stdio};
use std::time::{Duration, Instant};

use anyhow::{Context, bail};
use nix::sys::signal::{Signal, kill};
use nix::unistd::Pid;

/// A running service with a fresh data folder; ended and removed when dropped.
pub(crate) struct Service {
    process: Child,
    folder: PathBuf,
    pub(crate) address: SocketAddr,
}

/// How to reach the service's database.
pub(crate) struct Database {
    pub(crate) socket: PathBuf,
    pub(crate) port: String,
    pub(crate) user: String,
    pub(crate) name: String,
}

impl Service {
    /// Starts the service and waits until it is ready.
    pub(crate) fn start() -> anyhow::Result<Self> {
        let folder = std::env::temp_dir().join(format!("realterms-bench-{}", std::process::id()));
        let address = TcpListener::bind((Ipv4Addr::LOCALHOST, 0))?.local_addr()?;
        let mut command = Command::new(env!("CARGO_BIN_EXE_realterms"));
        for (name, _) in std::env::vars_os() {
            // Shipped settings, whatever the shell of whoever measures has set.
            if name.to_string_lossy().starts_with("REALTERMS_") {
                command.env_remove(name);
            }
        }
        let process = command
            .arg("serve")
            .arg(format!("--listen={address}"))
            .arg(format!("--data-folder={}", folder.display()))
            .stdin(Stdio::null())
            .stdout(Stdio::null())
            .stderr(fs::File::create(folder.with_extension("log"))?)
            .spawn()?;
        let mut service = Self {
            process,
            folder,
            address,
        };
        let patience = Instant::now() + Duration::from_secs(60);
        while !service.answers_ready() {
            if let Some(status) = service.process.try_wait()? {
                bail!("the service ended with {status}: {}", service.log());
            }
            if Instant::now() > patience {
                bail!("the service is not ready after 60 s: {}", service.log());
            }
            std::thread::sleep(Duration::from_millis(50));
        }
        Ok(service)
    }

    fn answers_ready(&self) -> bool {
        self.request("GET", "/readyz", "", "").is_ok()
    }

    fn log(&self) -> String {
        fs::read_to_string(self.folder.with_extension("log")).unwrap_or_default()
    }

    /// Sends one request and gives the whole answer; anything but a success is an error.
    pub(crate) fn request(
        &self,
        method: &str,
        path: &str,
        media_type: &str,
        body: &str,
    ) -> anyhow::Result<String> {
        let mut stream = TcpStream::connect(self.address)?;
        let length = body.len();
        let host = self.address;
        write!(
            stream,
            "{method} {path} HTTP/1.1\r\nHost: {host}\r\nConnection: close\r\n\
             Content-Type: {media_type}\r\nContent-Length: {length}\r\n\r\n{body}"
        )?;
        let mut answer = String::new();
        stream.read_to_string(&mut answer)?;
        if !answer.starts_with("HTTP/1.1 2") {
            bail!("{method} {path}: {answer}");
        }
        Ok(answer)
    }

    /// Where the private cluster listens, as the server's own pid file says.
    pub(crate) fn database(&self) -> anyhow::Result<Database> {
        let path = self.folder.join("postgres").join("postmaster.pid");
        let text = fs::read_to_string(&path).with_context(|| path.display().to_string())?;
        let line = |n: usize| text.lines().nth(n).context("a short postmaster.pid");
        Ok(Database {
            port: line(3)?.trim().to_owned(),
            socket: PathBuf::from(line(4)?.trim()),
            user: "realterms".to_owned(),
            name: "realterms".to_owned(),
        })
    }
}

impl Drop for Service {
    fn drop(&mut self) {
        if let Ok(id) = i32::try_from(self.process.id()) {
            // It may have ended already; then there is nothing to end.
            let _ = kill(Pid::from_raw(id), Signal::SIGTERM);
        }
        let _ = self.process.wait();
        let _ = fs::remove_dir_all(&self.folder);
        let _ = fs::remove_file(self.folder.with_extension("log"));
    }
}
