//! A place in the bytes of a legacy file.

use super::numbers::{Kind, Order, parse_text};
use crate::VtkError;

/// Reads lines, words and numbers one after the other.
pub(super) struct Cursor<'a> {
    rest: &'a [u8],
    /// Whether numbers stand as bytes (big-endian) rather than as text.
    pub binary: bool,
}

impl<'a> Cursor<'a> {
    pub fn new(bytes: &'a [u8]) -> Self {
        Self {
            rest: bytes,
            binary: false,
        }
    }

    /// The next line, without its end; `None` at the end of the file.
    pub fn line(&mut self) -> Option<&'a [u8]> {
        if self.rest.is_empty() {
            return None;
        }
        let end = self.rest.iter().position(|&c| c == b'\n');
        let (line, rest) = match end {
            Some(end) => (&self.rest[..end], &self.rest[end + 1..]),
            None => (self.rest, &self.rest[..0]),
        };
        self.rest = rest;
        Some(line.strip_suffix(b"\r").unwrap_or(line))
    }

    /// The words of the next line that has any; empty at the end of the file.
    pub fn words(&mut self) -> Result<Vec<&'a str>, VtkError> {
        self.rest = self.rest.trim_ascii_start();
        let line = self.line().unwrap_or_default();
        // Header lines are short; a long one is data read as text.
        let text = std::str::from_utf8(line)
            .ok()
            .filter(|text| text.len() < 4096)
            .ok_or_else(|| {
                let start = String::from_utf8_lossy(&line[..line.len().min(40)]);
                VtkError::malformed(
                    "keyword",
                    format!("a line of text was expected, not {start:?}"),
                )
            })?;
        Ok(text.split_ascii_whitespace().collect())
    }

    /// Whether the next word starts with `word`, in any case of letters.
    pub fn is_next(&self, word: &str) -> bool {
        self.rest
            .trim_ascii_start()
            .get(..word.len())
            .is_some_and(|start| start.eq_ignore_ascii_case(word.as_bytes()))
    }

    /// Takes bytes as they are.
    pub fn bytes(&mut self, name: &str, count: u64) -> Result<&'a [u8], VtkError> {
        let taken = usize::try_from(count)
            .ok()
            .and_then(|count| self.rest.split_at_checked(count));
        let Some((bytes, rest)) = taken else {
            let problem = format!("{count} bytes are announced, {} follow", self.rest.len());
            return Err(VtkError::malformed(name, problem));
        };
        self.rest = rest;
        Ok(bytes)
    }

    /// Takes `count` numbers as text, up to the last one's end.
    fn text(&mut self, name: &str, count: u64) -> Result<&'a str, VtkError> {
        // Each number but the last takes a digit and a blank.
        if count > self.rest.len() as u64 / 2 + 1 {
            let problem = format!("{count} numbers are announced, but the file ends earlier");
            return Err(VtkError::malformed(name, problem));
        }
        let mut end = 0;
        for _ in 0..count {
            let tail = &self.rest[end..];
            let blanks = tail.iter().take_while(|c| c.is_ascii_whitespace()).count();
            let word = tail[blanks..]
                .iter()
                .take_while(|c| !c.is_ascii_whitespace())
                .count();
            end += blanks + word;
        }
        let bytes = self.bytes(name, end as u64)?;
        std::str::from_utf8(bytes).map_err(|_| VtkError::malformed(name, "numbers were expected"))
    }

    pub fn floats(&mut self, name: &str, kind: Kind, count: u64) -> Result<Vec<f64>, VtkError> {
        if self.binary {
            let bytes = self.bytes(name, count.saturating_mul(kind.size() as u64))?;
            return Ok(kind.floats(bytes, Order::Big));
        }
        parse_text(name, self.text(name, count)?, count as usize)
    }

    pub fn indices(&mut self, name: &str, kind: Kind, count: u64) -> Result<Vec<u64>, VtkError> {
        if self.binary {
            let bytes = self.bytes(name, count.saturating_mul(kind.size() as u64))?;
            return kind
                .indices(bytes, Order::Big)
                .ok_or_else(|| VtkError::malformed(name, "whole numbers are needed here"));
        }
        parse_text(name, self.text(name, count)?, count as usize)
    }

    /// Passes over texts: a line each, or the length in the first bits and then the bytes.
    pub fn skip_texts(&mut self, name: &str, count: u64) -> Result<(), VtkError> {
        for _ in 0..count {
            if !self.binary {
                self.line()
                    .ok_or_else(|| VtkError::malformed(name, "the file ends within the texts"))?;
                continue;
            }
            let first = self.bytes(name, 1)?[0];
            // The two highest bits tell how many bytes the length takes: 3 → 1, 2 → 2, 1 → 4, 0 → 8.
            let more = match first >> 6 {
                3 => 0,
                2 => 1,
                1 => 3,
                _ => 7,
            };
            let tail = self.bytes(name, more)?;
            let length = tail.iter().fold(u64::from(first & 0x3f), |sum, &byte| {
                (sum << 8) | u64::from(byte)
            });
            self.bytes(name, length)?;
        }
        Ok(())
    }
}
