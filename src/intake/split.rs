//! Where the cells of one record lie (RFC 4180, with any delimiter), without copying them.

use std::borrow::Cow;

/// Layout of one record in the text; offsets count from its first byte. Reused from record to
/// record.
#[derive(Debug, Default)]
pub(super) struct Record {
    /// End of each cell; a cell begins one byte after the end of the one before.
    pub ends: Vec<usize>,
    /// Bytes up to and including the line feed.
    pub length: usize,
    /// Physical lines that it takes.
    pub lines: u64,
}

/// What a scan found.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Scan {
    /// A whole record.
    Whole,
    /// The text ends inside the record and more may come.
    Partial,
    /// The text ends inside a quoted cell and nothing more comes.
    Unclosed,
}

impl Record {
    /// Scans a record whose first `self.ends.len()` cells, of `from` bytes with their delimiters
    /// and without line feeds, are known already. `last` says that the text is all there is.
    pub(super) fn scan(&mut self, text: &[u8], from: usize, delimiter: u8, last: bool) -> Scan {
        self.lines = 0;
        let mut begin = from;
        let (mut at, mut marks) = (from, marks(text, from, delimiter));
        loop {
            // A quoted cell: on to the quote that closes it, which no other quote follows.
            if text.get(begin) == Some(&b'"') {
                let mut i = begin + 1;
                loop {
                    match text.get(i) {
                        None if last => return Scan::Unclosed,
                        None => return Scan::Partial,
                        Some(b'"') if text.get(i + 1) == Some(&b'"') => i += 2,
                        Some(b'"') => break,
                        Some(b) => {
                            self.lines += u64::from(*b == b'\n');
                            i += 1;
                        }
                    }
                }
                (at, marks) = (i + 1, self::marks(text, i + 1, delimiter));
            }
            while marks == 0 {
                at += 8;
                if at >= text.len() {
                    if !last {
                        return Scan::Partial;
                    }
                    self.close(text, text.len());
                    self.length = text.len();
                    return Scan::Whole;
                }
                marks = self::marks(text, at, delimiter);
            }
            let end = at + marks.trailing_zeros() as usize / 8;
            marks &= marks - 1;
            if text[end] == b'\n' {
                self.close(text, end);
                self.length = end + 1;
                return Scan::Whole;
            }
            self.ends.push(end);
            begin = end + 1;
        }
    }

    /// Ends the last cell before the line end at `i`.
    fn close(&mut self, text: &[u8], i: usize) {
        let begin = self.ends.last().map_or(0, |end| end + 1);
        let carriage_return = i > begin && text[i - 1] == b'\r';
        self.ends.push(i - usize::from(carriage_return));
        self.lines += 1;
    }

    /// Bytes of the record without its line end.
    pub(super) fn content(&self) -> usize {
        self.ends.last().copied().unwrap_or(0)
    }

    /// First byte of a cell.
    #[inline]
    pub(super) fn start(&self, cell: usize) -> usize {
        if cell == 0 {
            0
        } else {
            self.ends[cell - 1] + 1
        }
    }

    /// A cell as it stands in the record, quotes included.
    #[inline]
    pub(super) fn raw<'a>(&self, text: &'a str, cell: usize) -> &'a str {
        &text[self.start(cell)..self.ends[cell]]
    }
}

/// The highest bit of each of the eight bytes from `at` on that is a delimiter or a line feed.
///
/// Of a byte `x`, `(x & 0x7f) + 0x7f` and `x` itself have their highest bit unset only if `x` is
/// zero, and no carry leaves the byte (Warren, Hacker's Delight, 2nd ed., section 6-1).
fn marks(text: &[u8], at: usize, delimiter: u8) -> u64 {
    const ONES: u64 = u64::from_le_bytes([1; 8]);
    const LOW: u64 = u64::from_le_bytes([0x7f; 8]);
    let mut bytes = [0; 8];
    match text.get(at..at + 8) {
        Some(eight) => bytes.copy_from_slice(eight),
        None => {
            let rest = text.get(at..).unwrap_or_default();
            bytes[..rest.len()].copy_from_slice(rest);
        }
    }
    let word = u64::from_le_bytes(bytes);
    let equal = |byte: u8| {
        let x = word ^ (ONES * u64::from(byte));
        !(((x & LOW) + LOW) | x | LOW)
    };
    equal(delimiter) | equal(b'\n')
}

/// The content of a raw cell: quotes undone, blanks around it dropped; `None` where text follows
/// the closing quote.
#[inline]
pub(super) fn content(raw: &str) -> Option<Cow<'_, str>> {
    let Some(inner) = raw.strip_prefix('"') else {
        return Some(Cow::Borrowed(raw.trim_ascii()));
    };
    let inner = inner.trim_ascii_end().strip_suffix('"')?;
    if !inner.contains('"') {
        return Some(Cow::Borrowed(inner.trim_ascii()));
    }
    let whole = inner.replace("\"\"", "\u{0}");
    if whole.contains('"') {
        return None;
    }
    Some(Cow::Owned(
        whole.replace('\u{0}', "\"").trim_ascii().to_owned(),
    ))
}

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use super::*;

    fn records(text: &str) -> Vec<Vec<String>> {
        let mut found = Vec::new();
        let mut at = 0;
        while at < text.len() {
            let mut record = Record::default();
            let rest = &text[at..];
            assert_eq!(record.scan(rest.as_bytes(), 0, b',', true), Scan::Whole);
            found.push(
                (0..record.ends.len())
                    .map(|c| content(record.raw(rest, c)).unwrap().into_owned())
                    .collect(),
            );
            at += record.length;
        }
        found
    }

    proptest! {
        /// The csv crate writes; this reads the same cells. Cells with blanks at their ends and
        /// with NUL are left out: the one is trimmed here, the other refused earlier.
        #[test]
        fn reads_what_the_csv_crate_writes(
            rows in proptest::collection::vec(proptest::collection::vec("[a-z,\"\n]{0,5}", 2..5), 1..6),
            crlf: bool,
        ) {
            let mut writer = csv::WriterBuilder::new()
                .flexible(true)
                .terminator(if crlf { csv::Terminator::CRLF } else { csv::Terminator::Any(b'\n') })
                .from_writer(Vec::new());
            for row in &rows {
                writer.write_record(row).unwrap();
            }
            let text = String::from_utf8(writer.into_inner().unwrap()).unwrap();
            let trimmed: Vec<Vec<String>> = rows.iter()
                .map(|r| r.iter().map(|c| c.trim_ascii().to_owned()).collect()).collect();
            prop_assert_eq!(records(&text), trimmed);
        }

        #[test]
        fn a_record_cut_anywhere_is_partial(cut in 0..17_usize) {
            let text = "\"a\nb\",c,\"d\"\"e\"\r\n";
            let mut record = Record::default();
            prop_assert_eq!(
                record.scan(&text.as_bytes()[..cut], 0, b',', false),
                if cut == text.len() { Scan::Whole } else { Scan::Partial }
            );
        }
    }

    #[test]
    fn text_after_a_closing_quote_is_no_cell() {
        assert_eq!(content("\"a\"b"), None);
        assert_eq!(content("\"a\"b\""), None);
        assert_eq!(content("\""), None);
        assert_eq!(content("a\"b").unwrap(), "a\"b");
        assert_eq!(content(" a ").unwrap(), "a");
        assert_eq!(content("\"\"\"\"").unwrap(), "\"");
    }
}
