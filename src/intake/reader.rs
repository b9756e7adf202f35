//! The reader: bytes pushed in, pieces and a report out.

use super::decode::Decoder;
use super::fault::Fatal;
use super::header::Layout;
use super::report::{Intake, Understood};
use super::rows::{Rows, too_long};
use super::settings::{Context, Limits, Settings};
use crate::finding::Finding;
use crate::series::Piece;

/// Reads one file that is pushed in, in chunks of any size. Results do not depend on where the
/// chunks are cut.
pub struct Reader {
    settings: Settings,
    context: Context,
    limits: Limits,
    decoder: Decoder,
    /// Decoded text that is not read yet.
    text: String,
    /// Physical lines read.
    lines: u64,
    /// Present once the header is read.
    rows: Option<Rows>,
    /// Kept so that a reader that failed says so again.
    failed: Option<Fatal>,
}

impl Reader {
    /// A reader for one file. `gzip` says that the body was declared to be gzip; without it gzip
    /// is recognised by its first two bytes.
    ///
    /// # Errors
    /// [`Fatal`] where a constant names an unknown currency.
    pub fn new(
        settings: Settings,
        context: Context,
        limits: Limits,
        gzip: bool,
    ) -> Result<Self, Fatal> {
        settings.check(&context).map_err(Fatal::Refused)?;
        Ok(Self {
            settings,
            context,
            limits,
            decoder: Decoder::new(limits, gzip),
            text: String::new(),
            lines: 0,
            rows: None,
            failed: None,
        })
    }

    /// Takes the next bytes of the file.
    ///
    /// # Errors
    /// [`Fatal`] as soon as it is known that the file cannot be read. The reader is of no use then
    /// and answers the same again.
    pub fn push(&mut self, bytes: &[u8]) -> Result<(), Fatal> {
        if let Some(fatal) = &self.failed {
            return Err(fatal.clone());
        }
        let result = self.take_bytes(bytes);
        self.failed = result.as_ref().err().cloned();
        result
    }

    fn take_bytes(&mut self, mut bytes: &[u8]) -> Result<(), Fatal> {
        while !bytes.is_empty() {
            let before = self.text.len();
            let taken = self.decoder.feed(bytes, &mut self.text);
            // What came before a fault is read first: its own faults are nearer to the cause.
            if self.text.as_bytes()[before..].contains(&b'\n') {
                self.read_text(false)?;
            }
            if self.text.len() > self.limits.max_row_bytes.saturating_add(2) {
                return Err(too_long(self.lines + 1, self.limits.max_row_bytes));
            }
            bytes = &bytes[taken.map_err(|fault| self.decoding(fault))?..];
        }
        Ok(())
    }

    fn decoding(&self, fault: super::decode::Fault) -> Fatal {
        let pending = self.text.bytes().filter(|b| *b == b'\n').count() as u64;
        Fatal::decoding(fault, self.lines + pending + 1, &self.limits)
    }

    /// Reads whole lines; with `last` also one without line end.
    fn read_text(&mut self, last: bool) -> Result<(), Fatal> {
        let text = std::mem::take(&mut self.text);
        let mut at = 0;
        if self.rows.is_none() {
            at = self.read_header(&text, last)?;
        }
        if let Some(rows) = &mut self.rows {
            while at < text.len() {
                let Some((length, lines)) = rows.next(&text[at..], self.lines + 1, last)? else {
                    break;
                };
                at += length;
                self.lines += lines;
            }
        }
        self.text = text;
        self.text.drain(..at);
        Ok(())
    }

    /// Reads up to and including the first line that is not blank; the bytes read.
    fn read_header(&mut self, text: &str, last: bool) -> Result<usize, Fatal> {
        let mut at = 0;
        while at < text.len() && self.rows.is_none() {
            let rest = &text[at..];
            let end = match rest.find('\n') {
                Some(end) => end,
                None if last => rest.len(),
                None => break,
            };
            let header = rest[..end].strip_suffix('\r').unwrap_or(&rest[..end]);
            // A byte order mark may open the file.
            let header = match self.lines {
                0 => header.strip_prefix('\u{feff}').unwrap_or(header),
                _ => header,
            };
            self.lines += 1;
            at += (end + 1).min(rest.len());
            if header.trim_ascii().is_empty() {
                continue;
            }
            if header.len() > self.limits.max_row_bytes {
                return Err(too_long(self.lines, self.limits.max_row_bytes));
            }
            let layout = Layout::read(header, self.lines, &self.settings, &self.limits)
                .map_err(Fatal::Refused)?;
            self.rows = Some(Rows::new(
                &self.settings,
                &self.context,
                self.limits,
                layout,
            ));
        }
        Ok(at)
    }

    /// Memory that the rows gathered since the last [`Self::take_pieces`] need at most, the giving
    /// away included: about 45 bytes a row.
    #[must_use]
    pub fn pending_bytes(&self) -> usize {
        self.rows.as_ref().map_or(0, |r| r.gather.pending_bytes())
    }

    /// Gives away the rows gathered so far, so that the caller can spill them.
    pub fn take_pieces(&mut self) -> Vec<Piece> {
        self.rows
            .as_mut()
            .map_or_else(Vec::new, |r| r.gather.take())
    }

    /// Rows read so far, rejected ones included.
    #[must_use]
    pub fn rows_read(&self) -> u64 {
        self.rows.as_ref().map_or(0, |r| r.read)
    }

    /// Rows rejected so far: a caller that refuses files with rejects may stop early.
    #[must_use]
    pub fn rows_rejected(&self) -> u64 {
        self.rows.as_ref().map_or(0, |r| r.rejects.count)
    }

    /// Ends the file.
    ///
    /// # Errors
    /// [`Fatal`] where the file ends too early, is empty, or has no row.
    pub fn finish(mut self) -> Result<Intake, Fatal> {
        if let Some(fatal) = self.failed {
            return Err(fatal);
        }
        let ended = self.decoder.finish(&mut self.text);
        if let Err(fault) = ended {
            self.read_text(false)?;
            return Err(self.decoding(fault));
        }
        self.read_text(true)?;
        let Some(mut rows) = self.rows else {
            return Err(Fatal::one(
                Finding::error("empty_body", "the file is empty")
                    .expected("a header line and rows below it")
                    .remedy("send the file as the body of the request"),
            ));
        };
        if rows.read == 0 {
            return Err(Fatal::one(
                Finding::error("no_rows", "the file has a header and no row below it")
                    .at_line(self.lines)
                    .expected("at least one row")
                    .remedy("send the rows with the header, in one file"),
            ));
        }
        let understood = Understood {
            kind: self.settings.kind().to_owned(),
            columns: rows.columns(),
            constants: self.settings.constants(),
            delimiter: rows.layout.delimiter_name.to_owned(),
            compression: if self.decoder.is_gzip() {
                "gzip"
            } else {
                "none"
            }
            .to_owned(),
            lines: self.lines,
            rows_read: rows.read,
            rows_accepted: rows.accepted,
            rows_rejected: rows.rejects.count,
            rejects_by_code: rows.rejects.by_code.clone(),
            periods: rows.periods(),
            units: rows.gather.units(),
            series: rows.gather.series() as u64,
        };
        Ok(Intake {
            pieces: rows.gather.take(),
            understood,
            findings: rows.findings(),
            rejects: rows.rejects.kept,
        })
    }
}
