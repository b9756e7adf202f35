//! A body on its way in: hashed, compressed, read and stored as it comes.

use std::time::Duration;

use bytes::Bytes;
use futures_util::{Stream, StreamExt};
use sha2::{Digest, Sha256};
use tokio::sync::mpsc;
use tokio::time::Instant;

use super::Fault;
use super::groups::{Groups, Source};
use super::receiving::{Limits, too_large};
use crate::intake::{Fatal, Intake, Reader};
use crate::series::Piece;
use crate::store::{self, Connection};

/// Bytes of one stored part before compression.
const PART_BYTES: usize = 8 << 20;

/// What the worker thread tells.
enum FromWorker {
    Part(Vec<u8>),
    Pieces(Vec<Piece>),
    Done(Box<Body>),
    Failed(Fatal),
}

/// What the worker has learnt at the end of the body.
struct Body {
    sha256: Vec<u8>,
    byte_count: u64,
    intake: Intake,
}

/// A body that came whole.
pub(super) struct Received {
    pub(super) sha256: Vec<u8>,
    pub(super) byte_count: u64,
    /// What was read; its rows are in `source`.
    pub(super) intake: Intake,
    pub(super) source: Source,
}

/// Reads the body of an upload to its end; its raw bytes are stored as they come, its rows staged past the
/// memory budget.
pub(super) async fn receive<E: std::fmt::Display>(
    connection: &mut Connection,
    upload: i64,
    limits: &Limits,
    reader: Reader,
    body: impl Stream<Item = Result<Bytes, E>> + Unpin,
) -> Result<Received, Fault> {
    let mut receiver = Receiver {
        upload,
        limits,
        staged: None,
        parts: 0,
    };
    let mut body = receiver.stream(connection, reader, body).await?;
    let pieces = std::mem::take(&mut body.intake.pieces);
    let source = match receiver.staged {
        None => Source::in_memory(pieces),
        Some(_) => {
            receiver.stage(connection, pieces).await?;
            Source::staged(connection, receiver.staged.unwrap_or_default()).await?
        }
    };
    source.check()?;
    Ok(Received {
        sha256: body.sha256,
        byte_count: body.byte_count,
        intake: body.intake,
        source,
    })
}

struct Receiver<'a> {
    upload: i64,
    limits: &'a Limits,
    staged: Option<Groups>,
    parts: i32,
}

impl Receiver<'_> {
    /// Moves the body through the worker and stores what comes out.
    async fn stream<E: std::fmt::Display>(
        &mut self,
        connection: &mut Connection,
        reader: Reader,
        mut body: impl Stream<Item = Result<Bytes, E>> + Unpin,
    ) -> Result<Body, Fault> {
        let (to_worker, from_body) = mpsc::channel::<Bytes>(8);
        let (to_store, mut from_worker) = mpsc::channel::<FromWorker>(2);
        let budget = self.limits.memory_budget;
        let span = tracing::Span::current();
        let worker = tokio::task::spawn_blocking(move || {
            span.in_scope(|| work(reader, from_body, &to_store, budget));
        });
        let mut to_worker = Some(to_worker);
        let mut pending: Option<Bytes> = None;
        let mut pending_since = Instant::now();
        let mut pace = Pace::new(self.limits);
        let mut received: u64 = 0;
        loop {
            let sender = to_worker.clone();
            tokio::select! {
                biased;
                event = from_worker.recv() => {
                    let began = Instant::now();
                    match event {
                        Some(FromWorker::Part(bytes)) => {
                            store::upload::insert_part(connection, self.upload, self.parts, &bytes)
                                .await?;
                            self.parts += 1;
                        }
                        Some(FromWorker::Pieces(pieces)) => self.stage(connection, pieces).await?,
                        Some(FromWorker::Done(body)) => return Ok(*body),
                        Some(FromWorker::Failed(fatal)) => return Err(unreadable(&fatal)),
                        None => {
                            let reason = worker.await.err().map_or_else(String::new, |e| e.to_string());
                            return Err(Fault::Internal(format!("the reading thread ended: {reason}")));
                        }
                    }
                    // All that a chunk waits is excused when it goes on.
                    if pending.is_none() {
                        pace.excuse(began.elapsed());
                    }
                }
                permit = room(sender.as_ref()), if pending.is_some() => {
                    if let (Some(permit), Some(chunk)) = (permit, pending.take()) {
                        permit.send(chunk);
                    }
                    pace.excuse(pending_since.elapsed());
                }
                () = tokio::time::sleep_until(pace.deadline()), if pending.is_none() && to_worker.is_some() => {
                    pace.check()?;
                }
                chunk = body.next(), if pending.is_none() && to_worker.is_some() => match chunk {
                    None => to_worker = None,
                    Some(Err(e)) => return Err(Fault::BadRequest {
                        detail: format!("the body broke off after {received} bytes: {e}"),
                        errors: vec![],
                    }),
                    Some(Ok(chunk)) => {
                        received += chunk.len() as u64;
                        pace.count(chunk.len());
                        if received > self.limits.max_bytes {
                            return Err(too_large(self.limits.max_bytes));
                        }
                        pending = Some(chunk);
                        pending_since = Instant::now();
                    }
                },
            }
        }
    }

    async fn stage(
        &mut self,
        connection: &mut Connection,
        pieces: Vec<Piece>,
    ) -> Result<(), Fault> {
        if self.staged.is_none() {
            store::staging::create(connection).await?;
        }
        let groups = self.staged.get_or_insert_default();
        let numbered: Vec<(usize, Piece)> = pieces
            .into_iter()
            .map(|piece| (groups.add(&piece), piece))
            .collect();
        store::staging::insert(connection, &numbered).await?;
        Ok(())
    }
}

/// Waits for room in the channel; `None` where it is closed.
async fn room(sender: Option<&mpsc::Sender<Bytes>>) -> Option<mpsc::Permit<'_, Bytes>> {
    sender?.reserve().await.ok()
}

fn unreadable(fatal: &Fatal) -> Fault {
    match fatal {
        Fatal::TooLarge(_) => Fault::TooLarge {
            detail: fatal.to_string(),
            errors: fatal.findings().to_vec(),
        },
        Fatal::Refused(findings) => Fault::invalid("unreadable_file", findings.clone()),
    }
}

/// The worker: hashes and compresses the raw bytes, reads the rows.
fn work(
    mut reader: Reader,
    mut from_body: mpsc::Receiver<Bytes>,
    to_store: &mpsc::Sender<FromWorker>,
    budget: usize,
) {
    let mut hasher = Sha256::new();
    let mut part: Vec<u8> = Vec::new();
    let mut byte_count: u64 = 0;
    let send_part = |part: &mut Vec<u8>| {
        let compressed = zstd::bulk::compress(part, 1).expect("memory can be compressed");
        part.clear();
        to_store.blocking_send(FromWorker::Part(compressed)).is_ok()
    };
    while let Some(chunk) = from_body.blocking_recv() {
        hasher.update(&chunk);
        byte_count += chunk.len() as u64;
        for slice in chunk.chunks(PART_BYTES) {
            part.extend_from_slice(slice);
            if part.len() >= PART_BYTES && !send_part(&mut part) {
                return;
            }
        }
        if let Err(fatal) = reader.push(&chunk) {
            let _ = to_store.blocking_send(FromWorker::Failed(fatal));
            return;
        }
        if reader.pending_bytes() > budget
            && to_store
                .blocking_send(FromWorker::Pieces(reader.take_pieces()))
                .is_err()
        {
            return;
        }
    }
    if !part.is_empty() && !send_part(&mut part) {
        return;
    }
    let last = match reader.finish() {
        Ok(intake) => FromWorker::Done(Box::new(Body {
            sha256: hasher.finalize().to_vec(),
            byte_count,
            intake,
        })),
        Err(fatal) => FromWorker::Failed(fatal),
    };
    let _ = to_store.blocking_send(last);
}

/// Watches that a body keeps up the least rate.
struct Pace {
    min_bytes: u64,
    min_rate: u64,
    patience: Duration,
    since: Instant,
    bytes: u64,
}

impl Pace {
    fn new(limits: &Limits) -> Self {
        Self {
            min_bytes: limits.min_rate.saturating_mul(limits.patience.as_secs()),
            min_rate: limits.min_rate,
            patience: limits.patience,
            since: Instant::now(),
            bytes: 0,
        }
    }

    fn deadline(&self) -> Instant {
        self.since + self.patience
    }

    fn count(&mut self, bytes: usize) {
        self.bytes += bytes as u64;
    }

    /// Time spent waiting for our own side does not count against the client.
    fn excuse(&mut self, waited: Duration) {
        self.since += waited;
    }

    fn check(&mut self) -> Result<(), Fault> {
        if self.bytes < self.min_bytes {
            return Err(Fault::TooSlow {
                detail: format!(
                    "the body came with less than {} bytes a second for {} seconds; nothing was kept",
                    self.min_rate,
                    self.patience.as_secs()
                ),
            });
        }
        self.since = Instant::now();
        self.bytes = 0;
        Ok(())
    }
}
