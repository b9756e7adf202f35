//! A load generator that costs little: one blocking thread a connection, keep-alive, no HTTP library,
//! since it shares its processors with the service that it measures.

use std::io::{Read, Write};
use std::net::{SocketAddr, TcpStream};
use std::thread;
use std::time::{Duration, Instant};

use anyhow::{Context, bail};

/// What a run of load came to.
pub(crate) struct Load {
    /// Requests a second, all connections together.
    pub(crate) rate: f64,
    /// Seconds from request to answer that half, and 99 % of requests do not exceed.
    pub(crate) half: f64,
    pub(crate) most: f64,
}

/// Sends GET requests for `path` back to back on so many connections for so long.
pub(crate) fn get(
    address: SocketAddr,
    path: &str,
    connections: usize,
    time: Duration,
) -> anyhow::Result<Load> {
    let request =
        format!("GET {path} HTTP/1.1\r\nHost: {address}\r\nAccept: application/json\r\n\r\n");
    let began = Instant::now();
    let workers: Vec<_> = (0..connections)
        .map(|_| {
            let request = request.clone();
            thread::spawn(move || worker(address, request.as_bytes(), began + time))
        })
        .collect();
    let mut times = Vec::new();
    for worker in workers {
        let worker = worker.join().ok().context("a load thread ended early")?;
        times.extend(worker?);
    }
    let elapsed = began.elapsed().as_secs_f64();
    times.sort_by(f64::total_cmp);
    let last = times
        .len()
        .checked_sub(1)
        .context("no request was answered")?;
    Ok(Load {
        rate: times.len() as f64 / elapsed,
        half: times[last / 2],
        most: times[last * 99 / 100],
    })
}

/// Seconds of each request on one connection until the deadline.
fn worker(address: SocketAddr, request: &[u8], until: Instant) -> anyhow::Result<Vec<f64>> {
    let mut stream = TcpStream::connect(address)?;
    stream.set_nodelay(true)?;
    let mut buffer = vec![0; 256 << 10];
    let mut times = Vec::new();
    let mut now = Instant::now();
    while now < until {
        stream.write_all(request)?;
        read_answer(&mut stream, &mut buffer)?;
        let then = Instant::now();
        times.push((then - now).as_secs_f64());
        now = then;
    }
    Ok(times)
}

/// Reads one answer of status 200 with a Content-Length.
fn read_answer(stream: &mut TcpStream, buffer: &mut [u8]) -> anyhow::Result<()> {
    let (mut filled, mut whole) = (0, None);
    while whole.is_none_or(|n| filled < n) {
        let n = stream.read(&mut buffer[filled..])?;
        if n == 0 {
            bail!(
                "the service closed a connection, or an answer is longer than {}",
                buffer.len()
            );
        }
        filled += n;
        if whole.is_none()
            && let Some(end) = buffer[..filled].windows(4).position(|w| w == b"\r\n\r\n")
        {
            let head = std::str::from_utf8(&buffer[..end])?;
            if !head.starts_with("HTTP/1.1 200 ") {
                bail!(
                    "not an answer of status 200: {}",
                    head.lines().next().unwrap_or("")
                );
            }
            let length = head.lines().find_map(|line| {
                let (name, value) = line.split_once(':')?;
                name.eq_ignore_ascii_case("content-length")
                    .then(|| value.trim())
            });
            let length: usize = length
                .context("an answer without Content-Length")?
                .parse()?;
            whole = Some(end + 4 + length);
        }
    }
    Ok(())
}
