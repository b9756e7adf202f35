//! Received bytes to text: gzip or plain, UTF-8 checked, bounded.

use std::io::Write as _;

use flate2::write::MultiGzDecoder;

use super::settings::Limits;

/// Bytes taken at a time, so that memory stays bounded however much is pushed at once.
const SLICE: usize = 64 << 10;
/// Decoded bytes below which the compression ratio is not judged.
const RATIO_FROM: u64 = 16 << 20;

/// Why the bytes are no acceptable text. Offsets count decoded bytes from 0.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Fault {
    /// Said to be gzip, but does not begin as gzip does.
    NotGzip,
    /// The gzip stream is broken.
    DamagedGzip,
    /// The gzip stream ends before its end mark, or its checksum is wrong there.
    TruncatedGzip,
    /// More decoded bytes than allowed.
    TooLarge,
    /// More decoded bytes per received byte than allowed.
    Ratio,
    /// No UTF-8 here.
    InvalidUtf8 { offset: u64 },
    /// A NUL byte here.
    Nul { offset: u64 },
}

enum Source {
    Undecided { gzip_declared: bool, head: Vec<u8> },
    Plain,
    Gzip(Box<MultiGzDecoder<Vec<u8>>>),
}

pub(super) struct Decoder {
    source: Source,
    characters: Characters,
    received: u64,
    limits: Limits,
}

/// Checks UTF-8 over chunk borders.
struct Characters {
    /// First bytes of a character whose rest has not come yet.
    tail: Vec<u8>,
    decoded: u64,
}

impl Decoder {
    pub(super) fn new(limits: Limits, gzip_declared: bool) -> Self {
        Self {
            source: Source::Undecided {
                gzip_declared,
                head: Vec::new(),
            },
            characters: Characters {
                tail: Vec::new(),
                decoded: 0,
            },
            received: 0,
            limits,
        }
    }

    /// Takes some of the bytes and appends what they decode to; says how many it took. On a fault
    /// the text before it has been appended.
    pub(super) fn feed(&mut self, bytes: &[u8], text: &mut String) -> Result<usize, Fault> {
        let slice = &bytes[..bytes.len().min(SLICE)];
        let taken = match &mut self.source {
            Source::Undecided {
                gzip_declared,
                head,
            } => {
                // Two bytes at most are looked at one by one.
                head.extend(slice.first());
                match head.as_slice() {
                    [0x1f] => {}
                    [0x1f, 0x8b] => {
                        let mut decoder = Box::new(MultiGzDecoder::new(Vec::new()));
                        decoder.write_all(head).map_err(|_| Fault::DamagedGzip)?;
                        self.source = Source::Gzip(decoder);
                    }
                    _ if *gzip_declared => return Err(Fault::NotGzip),
                    _ => {
                        self.characters.append(head, text)?;
                        self.source = Source::Plain;
                    }
                }
                1.min(slice.len())
            }
            Source::Plain => {
                self.characters.append(slice, text)?;
                slice.len()
            }
            Source::Gzip(decoder) => {
                // One call gives back 32 KiB at most.
                let taken = decoder.write(slice).map_err(|_| Fault::DamagedGzip)?;
                if taken == 0 {
                    return Err(Fault::DamagedGzip);
                }
                let mut output = std::mem::take(decoder.get_mut());
                self.characters.append(&output, text)?;
                output.clear();
                *decoder.get_mut() = output;
                taken
            }
        };
        self.received += taken as u64;
        self.bounded()?;
        Ok(taken)
    }

    fn bounded(&self) -> Result<(), Fault> {
        let decoded = self.characters.decoded;
        if decoded > self.limits.max_decoded_bytes {
            return Err(Fault::TooLarge);
        }
        if decoded > RATIO_FROM && decoded / self.received.max(1) > self.limits.max_ratio {
            return Err(Fault::Ratio);
        }
        Ok(())
    }

    /// Appends what is left once all bytes have come.
    pub(super) fn finish(&mut self, text: &mut String) -> Result<(), Fault> {
        match &mut self.source {
            Source::Undecided { head, .. } => self.characters.append(head, text)?,
            Source::Plain => {}
            Source::Gzip(decoder) => {
                decoder.try_finish().map_err(|_| Fault::TruncatedGzip)?;
                let output = std::mem::take(decoder.get_mut());
                self.characters.append(&output, text)?;
            }
        }
        self.bounded()?;
        match self.characters.tail.len() {
            0 => Ok(()),
            n => Err(Fault::InvalidUtf8 {
                offset: self.characters.decoded - n as u64,
            }),
        }
    }

    pub(super) fn is_gzip(&self) -> bool {
        matches!(self.source, Source::Gzip(_))
    }
}

impl Characters {
    fn append(&mut self, mut bytes: &[u8], text: &mut String) -> Result<(), Fault> {
        self.decoded += bytes.len() as u64;
        while !self.tail.is_empty() {
            let Some((first, rest)) = bytes.split_first() else {
                return Ok(());
            };
            self.tail.push(*first);
            bytes = rest;
            match std::str::from_utf8(&self.tail) {
                Ok(character) => {
                    text.push_str(character);
                    self.tail.clear();
                }
                Err(e) if e.error_len().is_none() => {}
                Err(_) => {
                    let offset = self.decoded - (bytes.len() + self.tail.len()) as u64;
                    return Err(Fault::InvalidUtf8 { offset });
                }
            }
        }
        let from = self.decoded - bytes.len() as u64;
        let (good, fault) = match std::str::from_utf8(bytes) {
            Ok(good) => (good, None),
            Err(e) => {
                let (good, bad) = bytes.split_at(e.valid_up_to());
                let offset = from + good.len() as u64;
                let good = std::str::from_utf8(good).unwrap_or_default();
                if e.error_len().is_none() {
                    self.tail.extend_from_slice(bad);
                    (good, None)
                } else {
                    (good, Some(Fault::InvalidUtf8 { offset }))
                }
            }
        };
        if let Some(i) = good.find('\0') {
            text.push_str(&good[..i]);
            return Err(Fault::Nul {
                offset: from + i as u64,
            });
        }
        text.push_str(good);
        fault.map_or(Ok(()), Err)
    }
}
