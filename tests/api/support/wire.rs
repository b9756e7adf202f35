//! One HTTP exchange written and read by hand, for what no client does: bodies that stop, or never begin.

use reqwest::Method;
use reqwest::header::{HeaderMap, HeaderName, HeaderValue};
use tokio::io::{AsyncBufReadExt, AsyncReadExt, AsyncWriteExt, BufReader};
use tokio::net::TcpStream;

use super::app::{Answer, TestApp};
use super::contract;

/// An exchange whose head was sent.
pub(crate) struct Wire<'a> {
    app: &'a TestApp,
    stream: BufReader<TcpStream>,
    method: Method,
    path: String,
}

impl<'a> Wire<'a> {
    pub(super) async fn open(
        app: &'a TestApp,
        method: Method,
        path: &str,
        headers: &[(&str, &str)],
    ) -> Self {
        let stream = TcpStream::connect(app.address).await.expect("it listens");
        let mut head = format!("{method} {path} HTTP/1.1\r\nHost: {}\r\n", app.address);
        for (name, value) in headers {
            head.push_str(&format!("{name}: {value}\r\n"));
        }
        head.push_str("\r\n");
        let mut wire = Self {
            app,
            stream: BufReader::new(stream),
            method,
            path: path.to_owned(),
        };
        wire.send(head.as_bytes()).await;
        wire
    }

    /// Sends bytes of the body.
    pub(crate) async fn send(&mut self, bytes: &[u8]) {
        self.stream.write_all(bytes).await.expect("bytes are taken");
    }

    /// Says that nothing more will come; the answer can still be read.
    pub(crate) async fn half_close(&mut self) {
        self.stream.shutdown().await.expect("a socket");
    }

    /// Reads a head: its status and headers.
    pub(crate) async fn head(&mut self) -> (u16, HeaderMap) {
        let line = self.line().await;
        let status = line.split(' ').nth(1).and_then(|s| s.parse().ok());
        let mut headers = HeaderMap::new();
        loop {
            let line = self.line().await;
            let Some((name, value)) = line.split_once(": ") else {
                assert_eq!(line, "");
                return (status.expect("a status line"), headers);
            };
            headers.insert(
                HeaderName::try_from(name).expect("a name"),
                HeaderValue::try_from(value).expect("a value"),
            );
        }
    }

    /// Reads the answer, interim ones left out, and checks it against the `OpenAPI` document.
    pub(crate) async fn answer(mut self) -> Answer {
        let (status, headers) = loop {
            let head = self.head().await;
            if head.0 >= 200 {
                break head;
            }
        };
        let length = headers
            .get("content-length")
            .map_or(0, |v| v.to_str().expect("text").parse().expect("a number"));
        let mut bytes = vec![0; length];
        self.stream
            .read_exact(&mut bytes)
            .await
            .expect("the body comes whole");
        let answer = Answer {
            status,
            headers,
            bytes,
        };
        if status >= 400 {
            let met = contract::check(&self.method, &self.path, &[], None, &answer);
            self.app.met.lock().expect("no panic").extend(met);
        }
        answer
    }

    async fn line(&mut self) -> String {
        let mut line = String::new();
        self.stream
            .read_line(&mut line)
            .await
            .expect("an answer comes");
        assert!(line.ends_with("\r\n"), "the connection ended: {line}");
        line.trim_end().to_owned()
    }
}
