//! The program at work, as a user sees it: its process, what it prints and logs, its answers.

use super::app::Answer;
use super::cluster::{Guard, Place, kill_hard};
use super::contract;
use nix::sys::signal::{Signal, kill};
use nix::unistd::Pid;
use reqwest::Method;
use reqwest::header::{HeaderMap, HeaderName, HeaderValue};
use std::fs::File;
use std::io::{BufRead, BufReader, Read, Write};
use std::net::{Shutdown, SocketAddr, TcpStream};
use std::path::PathBuf;
use std::process::{Child, ChildStdout, Command, ExitStatus, Stdio};
use std::thread::JoinHandle;
use std::time::{Duration, Instant};

/// A running command; its log is in the place.
pub(crate) struct Running {
    child: Child,
    says: BufReader<ChildStdout>,
    log: PathBuf,
    _guard: Guard,
}

impl Running {
    pub(crate) fn start(place: &Place, mut command: Command) -> Self {
        let log = place.root.join("log");
        let file = File::options().create(true).append(true).open(&log);
        let mut child = command
            .stdin(Stdio::null())
            .stdout(Stdio::piped())
            .stderr(file.expect("the place is ours"))
            .spawn()
            .expect("the program runs");
        Self {
            says: BufReader::new(child.stdout.take().expect("it is piped")),
            _guard: Guard::of(&child),
            child,
            log,
        }
    }

    /// What it prints, to the end of the line that has this text.
    pub(crate) fn until(&mut self, text: &str) -> String {
        let mut said = String::new();
        while !said.contains(text) {
            let read = self.says.read_line(&mut said).expect("it prints text");
            assert!(read > 0, "no '{text}' in:\n{said}\n{}", self.log());
        }
        said
    }

    /// What it prints from here to its end.
    pub(crate) fn rest(&mut self) -> String {
        let mut said = String::new();
        self.says.read_to_string(&mut said).expect("it prints text");
        said
    }

    pub(crate) fn log(&self) -> String {
        std::fs::read_to_string(&self.log).unwrap_or_default()
    }

    pub(crate) fn pid(&self) -> i32 {
        i32::try_from(self.child.id()).expect("a process number is small")
    }

    /// Kills it, as nothing could stop.
    pub(crate) fn kill(mut self) {
        kill_hard(self.pid());
        self.child.wait().expect("it is our child");
    }

    /// Asks it to end.
    pub(crate) fn terminate(&self) {
        kill(Pid::from_raw(self.pid()), Signal::SIGTERM).expect("it runs");
    }

    /// Waits until it has ended.
    pub(crate) fn end(mut self) -> ExitStatus {
        self.child.wait().expect("it is our child")
    }
}

/// A running `serve` on a free port.
pub(crate) struct Service {
    pub(crate) running: Running,
    pub(crate) address: SocketAddr,
    client: reqwest::Client,
}

impl Service {
    pub(crate) fn start(place: &Place, arguments: &[&str]) -> Self {
        let mut command = place.program(&["serve", "--listen=127.0.0.1:0"]);
        command.args(arguments);
        let mut running = Running::start(place, command);
        let said = running.until("listening on http://");
        let (_, address) = said.rsplit_once("http://").expect("it was waited for");
        Self {
            running,
            address: address.trim().parse().expect("an address"),
            client: reqwest::Client::builder()
                .no_proxy()
                .build()
                .expect("a client starts"),
        }
    }

    /// Waits until it can serve.
    pub(crate) async fn ready(&self) {
        let patience = Instant::now() + Duration::from_secs(60);
        let url = format!("http://{}/readyz", self.address);
        loop {
            let answer = self.client.get(&url).send().await.expect("it answers");
            if answer.status() == 200 {
                return;
            }
            assert!(Instant::now() < patience, "{}", self.running.log());
            tokio::time::sleep(Duration::from_millis(20)).await;
        }
    }

    pub(crate) async fn get(&self, target: &str) -> Answer {
        let request = self.client.get(format!("http://{}{target}", self.address));
        let answer = Answer::of(request.send().await.expect("it answers")).await;
        contract::check(&Method::GET, target, &[], None, &answer);
        answer
    }

    /// Declares a currency.
    pub(crate) async fn declare(&self, code: &str, area: &str) {
        let target = format!("/v1/currencies/{code}");
        let request = self.client.put(format!("http://{}{target}", self.address));
        let body = format!(r#"{{"name": "Money of {area}", "areas": ["{area}"]}}"#);
        let headers = [("Content-Type", "application/json")];
        let request = request
            .header(headers[0].0, headers[0].1)
            .body(body.clone());
        let answer = Answer::of(request.send().await.expect("it answers")).await;
        contract::check(
            &Method::PUT,
            &target,
            &headers,
            Some(body.as_bytes()),
            &answer,
        );
        answer.expect(201);
    }
}

/// An upload whose body is sent piece by piece; its answer is read meanwhile.
pub(crate) struct Sending {
    stream: TcpStream,
    target: String,
    answer: JoinHandle<Option<Answer>>,
}

/// How long an answer may take.
const PATIENCE: Duration = Duration::from_secs(120);

impl Sending {
    /// Sends the head of an upload: `query` is everything behind `?`, `length` that of the body.
    pub(crate) fn begin(address: SocketAddr, query: &str, length: usize) -> Self {
        let target = format!("/v1/uploads?{query}");
        let mut stream = TcpStream::connect(address).expect("it listens");
        stream.set_nodelay(true).expect("a socket");
        write!(
            stream,
            "POST {target} HTTP/1.1\r\nHost: {address}\r\nConnection: close\r\nContent-Type: text/csv\r\n\
             Content-Length: {length}\r\n\r\n"
        )
        .expect("it reads");
        let mut answers = stream.try_clone().expect("a socket");
        answers.set_read_timeout(Some(PATIENCE)).expect("a socket");
        let answer = std::thread::spawn(move || {
            let mut bytes = Vec::new();
            // Broken off or not: what came tells.
            let _ = answers.read_to_end(&mut bytes);
            whole_answer(&bytes)
        });
        Self {
            stream,
            target,
            answer,
        }
    }

    /// Sends a piece of the body; false where nobody reads it any more.
    pub(crate) fn send(&mut self, bytes: &[u8]) -> bool {
        self.stream.write_all(bytes).is_ok()
    }

    pub(crate) fn is_answered(&self) -> bool {
        self.answer.is_finished()
    }

    /// The answer; `None` where the connection broke before all of it had come.
    pub(crate) fn answer(self) -> Option<Answer> {
        let answer = self.answer.join().expect("no panic");
        let _ = self.stream.shutdown(Shutdown::Both);
        if let Some(answer) = &answer {
            let headers = [("Content-Type", "text/csv")];
            contract::check(&Method::POST, &self.target, &headers, Some(&[]), answer);
        }
        answer
    }
}

fn whole_answer(bytes: &[u8]) -> Option<Answer> {
    let end = bytes.windows(4).position(|w| w == b"\r\n\r\n")?;
    let head = std::str::from_utf8(&bytes[..end]).ok()?;
    let mut lines = head.split("\r\n");
    let status = lines.next()?.split(' ').nth(1)?.parse().ok()?;
    let mut headers = HeaderMap::new();
    for line in lines {
        let (name, value) = line.split_once(": ")?;
        let name: HeaderName = name.parse().ok()?;
        headers.append(name, HeaderValue::from_str(value).ok()?);
    }
    let length: usize = headers.get("content-length")?.to_str().ok()?.parse().ok()?;
    let body = &bytes[end + 4..];
    (body.len() == length).then(|| Answer {
        status,
        headers,
        bytes: body.to_vec(),
    })
}
