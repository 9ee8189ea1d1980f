//! Raw bytes to lines of text: encoding, line ends, hash, with a bound on memory.

use sha2::{Digest, Sha256};
use std::io::Read;

/// Bytes looked at before anything is decided.
const HEAD_BYTES: usize = 256 * 1024;
/// The head grows to this where the first lines are so long that it holds fewer than `HEAD_LINES`.
const HEAD_BYTES_AT_MOST: usize = 4 * 1024 * 1024;
const HEAD_LINES: usize = 20;
/// No logger writes a record this long; a longer line is skipped, not held.
pub const LONGEST_LINE: usize = 1024 * 1024;

/// How the bytes stand for characters.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Encoding {
    /// UTF-8, ASCII, or a single-byte code: digits and delimiters are the same in all of them.
    Bytes {
        bom: bool,
    },
    Utf16Le {
        bom: bool,
    },
    Utf16Be {
        bom: bool,
    },
}

/// What ends a line.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum LineEnd {
    Lf,
    CrLf,
    Cr,
    /// Both line feeds and lone carriage returns, neither rare.
    Mixed,
}

/// Where a line lies in the buffer; `Lines::text` gives its bytes.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Span {
    start: usize,
    end: usize,
    /// Counted from 1.
    pub number: u64,
    /// A line end followed; false only for a last line without one.
    pub terminated: bool,
    /// Longer than `LONGEST_LINE`: only its beginning is held.
    pub overlong: bool,
}

/// Lines of a stream, decoded to UTF-8 or left as single bytes.
pub struct Lines<'a> {
    source: &'a mut dyn Read,
    hash: Sha256,
    bytes: u64,
    decoder: Option<encoding_rs::Decoder>,
    raw: Vec<u8>,
    text: Vec<u8>,
    position: usize,
    /// Bytes from `position` on already searched for a line end.
    searched: usize,
    ended: bool,
    number: u64,
    pub encoding: Encoding,
    pub line_end: LineEnd,
}

impl<'a> Lines<'a> {
    /// Reads the head and finds encoding and line ends from it.
    ///
    /// # Errors
    /// Whatever the source reports.
    pub fn open(source: &'a mut dyn Read) -> std::io::Result<Self> {
        let mut lines = Lines {
            source,
            hash: Sha256::new(),
            bytes: 0,
            decoder: None,
            raw: vec![0; HEAD_BYTES],
            text: Vec::new(),
            position: 0,
            searched: 0,
            ended: false,
            number: 0,
            encoding: Encoding::Bytes { bom: false },
            line_end: LineEnd::Lf,
        };
        let got = lines.read_raw()?;
        let start = &lines.raw[..got];
        lines.encoding = encoding_of(start);
        let bom = match lines.encoding {
            Encoding::Bytes { bom } => usize::from(bom) * 3,
            Encoding::Utf16Le { bom } | Encoding::Utf16Be { bom } => usize::from(bom) * 2,
        };
        lines.decoder = match lines.encoding {
            Encoding::Bytes { .. } => None,
            Encoding::Utf16Le { .. } => Some(encoding_rs::UTF_16LE.new_decoder_without_bom_handling()),
            Encoding::Utf16Be { .. } => Some(encoding_rs::UTF_16BE.new_decoder_without_bom_handling()),
        };
        lines.take_raw(bom, got);
        while !lines.ended
            && (lines.text.len() < HEAD_BYTES
                || (lines.text.len() < HEAD_BYTES_AT_MOST
                    && memchr::memchr2_iter(b'\n', b'\r', &lines.text).take(HEAD_LINES).count() < HEAD_LINES))
        {
            let got = lines.read_raw()?;
            lines.take_raw(0, got);
        }
        lines.line_end = line_end_of(&lines.text);
        Ok(lines)
    }

    /// The head, decoded; only before the first `next_line`.
    pub fn head(&self) -> &[u8] {
        &self.text[self.position..]
    }

    /// The head is the whole file.
    pub fn head_is_all(&self) -> bool {
        self.ended
    }

    /// Raw bytes read so far and their SHA-256 in lower-case hex; both are of the whole file once `next_line` gave `None`.
    pub fn finish(self) -> (u64, String) {
        let digest = self.hash.finalize();
        (self.bytes, digest.iter().map(|byte| format!("{byte:02x}")).collect())
    }

    /// The bytes of a line, without its end.
    pub fn text(&self, span: Span) -> &[u8] {
        &self.text[span.start..span.end]
    }

    /// The next line, `None` at the end.
    ///
    /// # Errors
    /// Whatever the source reports.
    pub fn next_line(&mut self) -> std::io::Result<Option<Span>> {
        loop {
            let unsearched = &self.text[self.position + self.searched..];
            let found = match self.line_end {
                LineEnd::Lf | LineEnd::CrLf => memchr::memchr(b'\n', unsearched),
                LineEnd::Cr => memchr::memchr(b'\r', unsearched),
                LineEnd::Mixed => memchr::memchr2(b'\n', b'\r', unsearched),
            };
            if let Some(offset) = found {
                let start = self.position;
                let end = start + self.searched + offset;
                let mut next = end + 1;
                // In a mixed file CR LF is one line end where both are in view.
                if self.line_end == LineEnd::Mixed && self.text[end] == b'\r' && self.text.get(next) == Some(&b'\n') {
                    next += 1;
                }
                self.position = next;
                self.searched = 0;
                self.number += 1;
                let overlong = end - start > LONGEST_LINE;
                return Ok(Some(Span { start, end, number: self.number, terminated: true, overlong }));
            }
            self.searched = self.text.len() - self.position;
            if self.searched > LONGEST_LINE {
                return self.skip_overlong().map(Some);
            }
            if self.ended {
                if self.searched == 0 {
                    return Ok(None);
                }
                let (start, end) = (self.position, self.text.len());
                self.position = end;
                self.searched = 0;
                self.number += 1;
                return Ok(Some(Span { start, end, number: self.number, terminated: false, overlong: false }));
            }
            self.text.drain(..self.position);
            self.position = 0;
            let got = self.read_raw()?;
            self.take_raw(0, got);
        }
    }

    /// Throws the rest of a line away that outgrew the limit.
    fn skip_overlong(&mut self) -> std::io::Result<Span> {
        const HELD: usize = 256;
        self.text.drain(..self.position);
        self.position = 0;
        let mut terminated = false;
        loop {
            self.text.truncate(HELD);
            if self.ended {
                break;
            }
            let got = self.read_raw()?;
            self.take_raw(0, got);
            let found = match self.line_end {
                LineEnd::Lf | LineEnd::CrLf => memchr::memchr(b'\n', &self.text[HELD..]),
                LineEnd::Cr => memchr::memchr(b'\r', &self.text[HELD..]),
                LineEnd::Mixed => memchr::memchr2(b'\n', b'\r', &self.text[HELD..]),
            };
            if let Some(offset) = found {
                self.text.drain(HELD..HELD + offset);
                terminated = true;
                break;
            }
        }
        self.number += 1;
        self.position = if terminated { HELD + 1 } else { self.text.len() };
        self.searched = 0;
        Ok(Span { start: 0, end: HELD.min(self.text.len()), number: self.number, terminated, overlong: true })
    }

    fn read_raw(&mut self) -> std::io::Result<usize> {
        let mut filled = 0;
        while filled < self.raw.len() {
            match self.source.read(&mut self.raw[filled..]) {
                Ok(0) => {
                    self.ended = true;
                    break;
                }
                Ok(count) => filled += count,
                Err(error) if error.kind() == std::io::ErrorKind::Interrupted => {}
                Err(error) => return Err(error),
            }
        }
        self.hash.update(&self.raw[..filled]);
        self.bytes += filled as u64;
        Ok(filled)
    }

    fn take_raw(&mut self, from: usize, to: usize) {
        let raw = self.raw.get(from..to).unwrap_or_default();
        match &mut self.decoder {
            None => self.text.extend_from_slice(raw),
            Some(decoder) => {
                let room = decoder.max_utf8_buffer_length(raw.len()).unwrap_or(raw.len() * 3 + 16);
                let before = self.text.len();
                self.text.resize(before + room, 0);
                let (_, _, written, _) = decoder.decode_to_utf8(raw, &mut self.text[before..], self.ended);
                self.text.truncate(before + written);
            }
        }
    }
}

/// A byte order mark, or the zero bytes that UTF-16 puts beside every ASCII character.
fn encoding_of(start: &[u8]) -> Encoding {
    match start {
        [0xEF, 0xBB, 0xBF, ..] => return Encoding::Bytes { bom: true },
        [0xFF, 0xFE, ..] => return Encoding::Utf16Le { bom: true },
        [0xFE, 0xFF, ..] => return Encoding::Utf16Be { bom: true },
        _ => {}
    }
    let sample = &start[..start.len().min(4096) & !1];
    let pairs = sample.len() / 2;
    let zeros = |offset: usize| sample.iter().skip(offset).step_by(2).filter(|&&byte| byte == 0).count();
    let (first, second) = (zeros(0), zeros(1));
    // Half is far above what a block of NUL padding leaves on one side only.
    if pairs >= 2 && second * 2 > pairs && first * 10 < second {
        Encoding::Utf16Le { bom: false }
    } else if pairs >= 2 && first * 2 > pairs && second * 10 < first {
        Encoding::Utf16Be { bom: false }
    } else {
        Encoding::Bytes { bom: false }
    }
}

fn line_end_of(head: &[u8]) -> LineEnd {
    let (mut lf, mut crlf, mut cr) = (0usize, 0usize, 0usize);
    for at in memchr::memchr2_iter(b'\n', b'\r', head) {
        let byte = head[at];
        if byte == b'\n' {
            lf += 1;
            if at > 0 && head[at - 1] == b'\r' {
                crlf += 1;
                cr -= 1;
            }
        } else {
            cr += 1;
        }
    }
    if lf == 0 && cr > 0 {
        LineEnd::Cr
    } else if cr > 2 && cr > lf / 4 && cr != lf {
        // As many lone CRs as LFs is the LF CR order some terminals send; the CRs are then trimmed.
        LineEnd::Mixed
    } else if crlf * 2 > lf {
        LineEnd::CrLf
    } else {
        LineEnd::Lf
    }
}

/// Text for people: UTF-8 if it is, else Windows-1252 (a superset of Latin-1, the usual single-byte code of loggers).
pub fn readable(bytes: &[u8]) -> String {
    match std::str::from_utf8(bytes) {
        Ok(text) => text.to_owned(),
        Err(_) => encoding_rs::WINDOWS_1252.decode_without_bom_handling(bytes).0.into_owned(),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn all(bytes: &[u8]) -> (Vec<(String, bool)>, Encoding, LineEnd) {
        let mut source = bytes;
        let mut lines = Lines::open(&mut source).unwrap();
        let mut out = Vec::new();
        while let Some(span) = lines.next_line().unwrap() {
            out.push((readable(lines.text(span)), span.terminated));
        }
        let (encoding, line_end) = (lines.encoding, lines.line_end);
        (out, encoding, line_end)
    }

    #[test]
    fn utf16_without_bom_is_seen_by_its_zero_bytes() {
        let text: Vec<u8> = "t,x\n1,2\n".encode_utf16().flat_map(u16::to_le_bytes).collect();
        let (lines, encoding, _) = all(&text);
        assert_eq!(encoding, Encoding::Utf16Le { bom: false });
        assert_eq!(lines, vec![("t,x".to_owned(), true), ("1,2".to_owned(), true)]);
        let text: Vec<u8> = "t,x\n1,2".encode_utf16().flat_map(u16::to_be_bytes).collect();
        let (lines, encoding, _) = all(&text);
        assert_eq!(encoding, Encoding::Utf16Be { bom: false });
        assert_eq!(lines[1], ("1,2".to_owned(), false));
    }

    #[test]
    fn lone_carriage_returns_end_lines() {
        let (lines, _, end) = all(b"a\rb\rc\r");
        assert_eq!(end, LineEnd::Cr);
        assert_eq!(lines.len(), 3);
    }

    #[test]
    fn the_hash_is_of_the_raw_bytes() {
        let mut source: &[u8] = b"abc";
        let mut lines = Lines::open(&mut source).unwrap();
        while lines.next_line().unwrap().is_some() {}
        // FIPS 180-2, appendix B.1: SHA-256 of "abc".
        assert_eq!(lines.finish().1, "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad");
    }

    #[test]
    fn a_line_longer_than_the_limit_is_skipped_and_the_next_one_read() {
        let mut text = b"1\n".to_vec();
        text.extend(std::iter::repeat_n(b'x', 7 * LONGEST_LINE));
        text.extend_from_slice(b"\n2\n");
        let mut source = text.as_slice();
        let mut lines = Lines::open(&mut source).unwrap();
        let mut seen = Vec::new();
        let mut most = 0;
        while let Some(span) = lines.next_line().unwrap() {
            seen.push((span.number, span.overlong, lines.text(span).first().copied()));
            most = most.max(lines.text.len());
        }
        assert_eq!(seen, vec![(1, false, Some(b'1')), (2, true, Some(b'x')), (3, false, Some(b'2'))]);
        assert!(most <= HEAD_BYTES_AT_MOST + HEAD_BYTES, "{most}");
    }
}
