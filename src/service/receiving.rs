//! Receiving an upload: one transaction from the first byte to the answer.
//!
//! The body streams through a worker thread that hashes, compresses and reads it; raw parts and, past
//! the memory budget, grouped rows go to the database as they come. No series is locked before the
//! body has ended. A killed process, a lost client or a failed database leave nothing behind.

use std::collections::{BTreeMap, HashMap};
use std::time::Duration;

use bytes::Bytes;
use futures_util::{Stream, StreamExt};
use sha2::{Digest, Sha256};
use tokio::sync::mpsc;
use tokio::time::Instant;

use super::uploads::{self, ReportParts};
use super::views::UploadView;
use super::{Fault, currencies, landing, preview};
use crate::finding::Finding;
use crate::intake::{self, Fatal, Intake, Reader};
use crate::series::provenance::Origin;
use crate::series::vintage::{Scope, Statement};
use crate::series::{Fragment, Piece, SeriesKey, Unit};
use crate::store::change::Action;
use crate::store::upload::{NewUpload, Outcome};
use crate::store::{self, Connection, Database, Savepoint};
use crate::time::Date;

/// Bytes of one stored part before compression.
const PART_BYTES: usize = 8 << 20;

/// Groups settled and stored at a time.
const BATCH: i32 = 1000;

/// How often a merge is tried when the database asks for another try.
const ATTEMPTS: usize = 4;

/// What becomes of an upload with rejects.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum OnReject {
    /// It is refused whole.
    Fail,
    /// The other rows land.
    Skip,
}

/// What becomes of an upload with a finding of severity error.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum OnFinding {
    /// It is kept and does not count until someone accepts it.
    Hold,
    /// It lands all the same.
    Land,
}

/// Everything about an upload but its body.
#[derive(Clone, Debug)]
pub struct Request {
    /// How to read it.
    pub settings: intake::Settings,
    /// Whether the header says gzip.
    pub gzip_declared: bool,
    /// Release date, if stated.
    pub released: Option<Date>,
    /// Today, the release date unless stated.
    pub today: Date,
    /// Title.
    pub title: String,
    /// Publisher.
    pub publisher: String,
    /// Note.
    pub note: String,
    /// Who sends it.
    pub author: String,
    /// What becomes of it when rows are rejected.
    pub on_reject: OnReject,
    /// What becomes of it when a finding would hold it.
    pub on_finding: OnFinding,
    /// What becomes of periods that it does not name.
    pub scope: Scope,
    /// Whether only to say what would happen.
    pub dry_run: bool,
}

/// Bounds on what one upload may cost.
#[derive(Clone, Copy, Debug)]
pub struct Limits {
    /// Bytes of the body as they come.
    pub max_bytes: u64,
    /// Bytes of grouped rows kept in memory.
    pub memory_budget: usize,
    /// Bytes a second that a body must keep up, over [`Limits::patience`].
    pub min_rate: u64,
    /// How long a body may be slower.
    pub patience: Duration,
    /// Bounds of reading.
    pub intake: intake::Limits,
}

/// Receives an upload.
///
/// # Errors
/// [`Fault::Invalid`] where the file cannot be read, [`Fault::Refused`] where rows were rejected and
/// `on_reject` is fail, [`Fault::TooLarge`], [`Fault::TooSlow`], [`Fault::Store`].
pub async fn receive<E: std::fmt::Display>(
    database: &Database,
    limits: &Limits,
    request: Request,
    body: impl Stream<Item = Result<Bytes, E>> + Unpin,
) -> Result<UploadView, Fault> {
    let parameters = uploads::parameters(&request);
    let parameters_json = serde_json::json!(parameters);
    let released = request.released.unwrap_or(request.today);
    let mut transaction = database.begin_upload().await?;
    let context = currencies::context(&mut transaction).await?;
    let reader = Reader::new(
        request.settings.clone(),
        context,
        limits.intake,
        request.gzip_declared,
    )
    .map_err(|fatal| Fault::BadRequest {
        detail: fatal.to_string(),
        errors: fatal.findings().to_vec(),
    })?;
    let new = NewUpload {
        kind: request.settings.kind(),
        parameters: &parameters_json,
        released,
        title: &request.title,
        publisher: &request.publisher,
        note: &request.note,
        author: &request.author,
    };
    let id = store::upload::begin(&mut transaction, &new).await?;
    let mut receiver = Receiver {
        id,
        limits,
        staged: None,
        parts: 0,
    };
    let body = receiver.stream(&mut transaction, reader, body).await?;

    let earlier = store::upload::same_bytes(&mut transaction, &body.sha256).await?;
    if let Some(row) = earlier.iter().find(|row| {
        row.kind == request.settings.kind()
            && row.parameters.0 == parameters_json
            && (request.released.is_none() || store::date(row.released).ok() == request.released)
    }) {
        return uploads::recognised(row.clone());
    }
    let mut parts = ReportParts::new(&body.intake);
    if let Some(other) = earlier
        .iter()
        .find(|row| row.kind != request.settings.kind() || row.parameters.0 != parameters_json)
    {
        parts.findings.push(
            Finding::error(
                "same_bytes_other_settings",
                format!(
                    "these bytes came before as upload {} with other settings",
                    other.id
                ),
            )
            .found(uploads::settings_text(&parameters, request.settings.kind()))
            .expected(uploads::stored_settings_text(other))
            .remedy("withdraw the one that is wrong, or accept this one if both are right"),
        );
    }

    let source = receiver
        .source(&mut transaction, body.intake.pieces)
        .await?;
    let mut attempt = 0;
    let (state, landed) = loop {
        attempt += 1;
        store::savepoint(&mut transaction, Savepoint::Upload).await?;
        match store_and_land(
            &mut transaction,
            id,
            released,
            &request,
            &source,
            &mut parts,
        )
        .await
        {
            Err(Fault::Store(e)) if e.is_transient() && attempt < ATTEMPTS => {
                store::rollback_to(&mut transaction, Savepoint::Upload).await?;
            }
            other => break other?,
        }
    };
    let report = parts.report(landed.as_ref());
    let report_json = serde_json::to_value(&report)
        .map_err(|e| Fault::Internal(format!("a report cannot be written: {e}")))?;
    let byte_count = i64::try_from(body.byte_count).unwrap_or(i64::MAX);
    let outcome = Outcome {
        state,
        sha256: &body.sha256,
        byte_count,
        compression: body.intake.understood.compression.as_str(),
        landed_revision: landed
            .as_ref()
            .filter(|_| state == "landed")
            .and_then(|l| l.revision),
        report: &report_json,
    };
    store::upload::finish(&mut transaction, id, &outcome).await?;
    let rejects: Vec<serde_json::Value> = parts
        .rejects
        .iter()
        .filter_map(|r| serde_json::to_value(r).ok())
        .collect();
    store::upload::insert_rejects(&mut transaction, id, &rejects).await?;
    let row = store::upload::get(&mut transaction, id)
        .await?
        .ok_or_else(|| Fault::Internal(format!("upload {id} vanished")))?;
    let mut view = uploads::view(row)?;
    if request.dry_run {
        view.dry_run = true;
        view.id = None;
        view.recorded = None;
        view.revision = None;
        store::rollback(transaction).await?;
    } else {
        store::commit(transaction).await?;
    }
    if state == "refused" {
        let errors: Vec<Finding> = report.rejects.iter().map(|r| r.finding.clone()).collect();
        let detail = format!(
            "{} rows were rejected, so nothing of the file counts; mend them, or send it with \
             on_reject=skip",
            report.understood.rows_rejected
        );
        return Err(Fault::Refused {
            detail,
            errors,
            upload: Box::new(view),
        });
    }
    Ok(view)
}

/// Stores what the upload says and makes it current, unless it is refused or held.
async fn store_and_land(
    connection: &mut Connection,
    id: i64,
    released: Date,
    request: &Request,
    source: &Source,
    parts: &mut ReportParts,
) -> Result<(&'static str, Option<landing::Landing>), Fault> {
    parts.forget_merge();
    let mut first = 0;
    while first < source.groups() {
        let groups = source.fetch(connection, first, first + BATCH).await?;
        first += BATCH;
        let fragments: Vec<Fragment> = groups
            .into_iter()
            .filter_map(Fragment::settle)
            .map(|(fragment, duplicates)| {
                parts.add_duplicates(&fragment.key, &duplicates);
                fragment
            })
            .collect();
        let wanted: Vec<(&SeriesKey, &Unit)> =
            fragments.iter().map(|f| (&f.key, &f.unit)).collect();
        let segments = store::series::ensure_segments(connection, &wanted).await?;
        let derived = store::vintage::fed_by_runs(
            connection,
            &segments.iter().map(|s| s.series_id).collect::<Vec<_>>(),
        )
        .await?;
        if let Some(i) = segments.iter().position(|s| derived.contains(&s.series_id)) {
            return Err(Fault::Conflict {
                code: "derived_series",
                detail: format!(
                    "{} is the output of a preparation and takes no uploads; send the data under \
                     another source",
                    fragments[i].key
                ),
            });
        }
        let statements: Vec<(i64, Statement)> = segments
            .iter()
            .zip(fragments)
            .map(|(segment, fragment)| (segment.id, statement(id, request.scope, fragment)))
            .collect();
        store::vintage::insert_fragments(connection, id, &statements).await?;
    }
    if parts.rejected() && request.on_reject == OnReject::Fail {
        store::rollback_to(connection, Savepoint::Upload).await?;
        return Ok(("refused", None));
    }
    store::savepoint(connection, Savepoint::Landing).await?;
    let landed = landing::land(connection, id, released, Action::Land, &request.author).await?;
    let opened = preview::opened_segments(connection, &landed.opened).await?;
    parts.add_landing(&landed, opened);
    if parts.holds() && request.on_finding == OnFinding::Hold {
        store::rollback_to(connection, Savepoint::Landing).await?;
        return Ok(("held", Some(landed)));
    }
    Ok(("landed", Some(landed)))
}

fn statement(upload: i64, scope: Scope, fragment: Fragment) -> Statement {
    let origins = fragment
        .lines
        .iter()
        .map(|line| match line {
            0 => Origin::Absent,
            line => Origin::Upload {
                id: upload,
                line: *line,
            },
        })
        .collect();
    Statement {
        start: fragment.start,
        values: fragment.values,
        status: fragment.status,
        origins,
        scope,
    }
}

/// What the worker thread tells.
enum FromWorker {
    Part(Vec<u8>),
    Pieces(Vec<Piece>),
    Done(Box<Body>),
    Failed(Fatal),
}

/// A body that has been read to its end.
struct Body {
    sha256: Vec<u8>,
    byte_count: u64,
    intake: Intake,
}

struct Receiver<'a> {
    id: i64,
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
                event = from_worker.recv() => match event {
                    Some(FromWorker::Part(bytes)) => {
                        store::upload::insert_part(connection, self.id, self.parts, &bytes).await?;
                        self.parts += 1;
                    }
                    Some(FromWorker::Pieces(pieces)) => self.stage(connection, pieces).await?,
                    Some(FromWorker::Done(body)) => return Ok(*body),
                    Some(FromWorker::Failed(fatal)) => return Err(unreadable(&fatal)),
                    None => {
                        let reason = worker.await.err().map_or_else(String::new, |e| e.to_string());
                        return Err(Fault::Internal(format!("the reading thread ended: {reason}")));
                    }
                },
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
        let numbered: Vec<(i32, Piece)> = pieces
            .into_iter()
            .map(|piece| (groups.number(&piece), piece))
            .collect();
        store::staging::insert(connection, &numbered).await?;
        Ok(())
    }

    async fn source(
        &mut self,
        connection: &mut Connection,
        pieces: Vec<Piece>,
    ) -> Result<Source, Fault> {
        if self.staged.is_some() {
            self.stage(connection, pieces).await?;
            store::staging::index(connection).await?;
            return Ok(Source::Staged(self.staged.take().unwrap_or_default()));
        }
        let mut groups = Groups::default();
        let mut grouped: Vec<Vec<Piece>> = Vec::new();
        for piece in pieces {
            let number = usize::try_from(groups.number(&piece)).unwrap_or(0);
            if number == grouped.len() {
                grouped.push(Vec::new());
            }
            grouped[number].push(piece);
        }
        Ok(Source::Memory(grouped))
    }
}

/// Waits for room in the channel; `None` where it is closed.
async fn room(sender: Option<&mpsc::Sender<Bytes>>) -> Option<mpsc::Permit<'_, Bytes>> {
    sender?.reserve().await.ok()
}

/// The answer to a body above the limit.
#[must_use]
pub fn too_large(limit: u64) -> Fault {
    Fault::TooLarge {
        detail: format!(
            "an upload may have at most {limit} bytes (setting REALTERMS_MAX_UPLOAD_BYTES); split the \
             file or compress it"
        ),
        errors: vec![],
    }
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
        let compressed = zstd::bulk::compress(part, 1).unwrap_or_default();
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

/// Numbers for the pairs of key and unit that occur.
#[derive(Default)]
struct Groups {
    numbers: HashMap<SeriesKey, Vec<i32>>,
    identities: Vec<(SeriesKey, Unit)>,
}

impl Groups {
    fn number(&mut self, piece: &Piece) -> i32 {
        let numbers = self.numbers.entry(piece.key.clone()).or_default();
        for number in numbers.iter() {
            let i = usize::try_from(*number).unwrap_or(0);
            if self.identities[i].1 == piece.unit {
                return *number;
            }
        }
        let number = i32::try_from(self.identities.len()).unwrap_or(i32::MAX);
        numbers.push(number);
        self.identities
            .push((piece.key.clone(), piece.unit.clone()));
        number
    }
}

/// Where the grouped rows of an upload are.
enum Source {
    Memory(Vec<Vec<Piece>>),
    Staged(Groups),
}

impl Source {
    fn groups(&self) -> i32 {
        let n = match self {
            Self::Memory(groups) => groups.len(),
            Self::Staged(groups) => groups.identities.len(),
        };
        i32::try_from(n).unwrap_or(i32::MAX)
    }

    /// The pieces of the groups from `first` to before `end`.
    async fn fetch(
        &self,
        connection: &mut Connection,
        first: i32,
        end: i32,
    ) -> Result<Vec<Vec<Piece>>, Fault> {
        let index = |n: i32| usize::try_from(n).unwrap_or(0);
        match self {
            Self::Memory(groups) => Ok(groups[index(first)..index(end).min(groups.len())].to_vec()),
            Self::Staged(groups) => {
                let identity = |n: i32| {
                    let (key, unit) = groups.identities[index(n)].clone();
                    Piece {
                        key,
                        unit,
                        periods: vec![],
                        values: vec![],
                        status: vec![],
                        lines: vec![],
                    }
                };
                let rows = store::staging::fetch(connection, first, end - 1, identity).await?;
                let mut grouped: BTreeMap<i32, Vec<Piece>> = BTreeMap::new();
                for (number, piece) in rows {
                    grouped.entry(number).or_default().push(piece);
                }
                Ok(grouped.into_values().collect())
            }
        }
    }
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
