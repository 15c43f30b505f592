//! The data of an array in an XML file: text, base64 or raw bytes, perhaps compressed.

use base64::Engine as _;
use base64::alphabet;
use base64::engine::{DecodePaddingMode, GeneralPurpose, GeneralPurposeConfig};
use std::borrow::Cow;
use std::io::Read as _;

use super::numbers::{Kind, Order};
use crate::VtkError;

/// Standard alphabet; a stream may end with or without padding.
const BASE64: GeneralPurpose = GeneralPurpose::new(
    &alphabet::STANDARD,
    GeneralPurposeConfig::new().with_decode_padding_mode(DecodePaddingMode::Indifferent),
);

/// Memory the LZMA decoder may take for its dictionary, KiB. VTK's highest level needs 65 MiB;
/// a hostile file may ask for 4 GiB.
const LZMA_MEMORY_KIB: u32 = 96 << 10;

/// Most bytes that one byte of LZ4 data can stand for.
const LZ4_EXPANSION: u64 = 255;

/// Compressor of a file.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Compressor {
    Zlib,
    Lz4,
    Lzma,
}

/// How the binary arrays of a file are laid out.
#[derive(Clone, Copy, Debug)]
pub(super) struct Layout {
    pub order: Order,
    /// Bytes per header word, 4 or 8.
    pub word: usize,
    pub compressor: Option<Compressor>,
}

/// Where the encoded bytes of an array start. What follows the array is ignored.
#[derive(Clone, Copy, Debug)]
pub(super) enum Source<'a> {
    Base64(&'a [u8]),
    Raw(&'a [u8]),
}

/// A stream that is read piece by piece: each piece stands encoded on its own.
struct Stream<'a> {
    name: &'a str,
    source: Source<'a>,
}

impl<'a> Stream<'a> {
    /// Decodes the next `bytes` bytes without moving on.
    fn peek(&self, bytes: u64) -> Result<Cow<'a, [u8]>, VtkError> {
        let ends_early =
            || VtkError::malformed(self.name, format!("the data end within {bytes} bytes"));
        let bytes_usize = usize::try_from(bytes).map_err(|_| ends_early())?;
        match self.source {
            Source::Raw(data) => Ok(Cow::Borrowed(
                data.get(..bytes_usize).ok_or_else(ends_early)?,
            )),
            Source::Base64(text) => {
                let length = encoded_length(bytes)
                    .and_then(|length| usize::try_from(length).ok())
                    .ok_or_else(ends_early)?;
                // The last group may lack its padding.
                let text = &text[..length.min(text.len())];
                let mut decoded = BASE64
                    .decode(text)
                    .map_err(|error| VtkError::malformed(self.name, error.to_string()))?;
                if decoded.len() < bytes_usize {
                    return Err(ends_early());
                }
                decoded.truncate(bytes_usize);
                Ok(Cow::Owned(decoded))
            }
        }
    }

    /// Moves on behind a piece of `bytes` bytes.
    fn skip(&mut self, bytes: u64) {
        let skip = |data: &'a [u8], length: Option<u64>| {
            let length = length.and_then(|length| usize::try_from(length).ok());
            data.get(length.unwrap_or(usize::MAX)..).unwrap_or_default()
        };
        self.source = match self.source {
            Source::Raw(data) => Source::Raw(skip(data, Some(bytes))),
            Source::Base64(text) => Source::Base64(skip(text, encoded_length(bytes))),
        };
    }
}

/// Characters that base64 takes for so many bytes.
fn encoded_length(bytes: u64) -> Option<u64> {
    bytes.div_ceil(3).checked_mul(4)
}

/// Decodes an array that must have exactly `expected` bytes.
pub(super) fn decode<'a>(
    name: &'a str,
    source: Source<'a>,
    layout: Layout,
    expected: u64,
) -> Result<Cow<'a, [u8]>, VtkError> {
    if expected == 0 {
        return Ok(Cow::Borrowed(&[]));
    }
    let stream = Stream { name, source };
    match layout.compressor {
        None => plain(stream, layout, expected),
        Some(compressor) => compressed(stream, layout, compressor, expected).map(Cow::Owned),
    }
}

fn plain<'a>(stream: Stream<'a>, layout: Layout, expected: u64) -> Result<Cow<'a, [u8]>, VtkError> {
    let word = layout.word as u64;
    let declared = words(&stream.peek(word)?, layout)[0];
    check_size(stream.name, declared, expected)?;
    // Header and data are one piece.
    match stream.peek(word.saturating_add(expected))? {
        Cow::Borrowed(data) => Ok(Cow::Borrowed(&data[layout.word..])),
        Cow::Owned(mut data) => {
            data.drain(..layout.word);
            Ok(Cow::Owned(data))
        }
    }
}

fn compressed(
    mut stream: Stream<'_>,
    layout: Layout,
    compressor: Compressor,
    expected: u64,
) -> Result<Vec<u8>, VtkError> {
    let name = stream.name;
    let word = layout.word as u64;
    let start = words(&stream.peek(3 * word)?, layout);
    let (blocks, block_bytes, last_bytes) = (start[0], start[1], start[2]);
    let overflow = || VtkError::malformed(name, "the sizes of its blocks overflow");
    let declared = match (blocks, last_bytes) {
        (0, _) => Some(0),
        (_, 0) => blocks.checked_mul(block_bytes),
        _ => (blocks - 1)
            .checked_mul(block_bytes)
            .and_then(|bytes| bytes.checked_add(last_bytes)),
    }
    .ok_or_else(overflow)?;
    check_size(name, declared, expected)?;
    let header = blocks
        .checked_add(3)
        .and_then(|count| count.checked_mul(word))
        .ok_or_else(overflow)?;
    let sizes = words(&stream.peek(header)?, layout);
    let sizes = &sizes[3..];
    stream.skip(header);
    let total = sizes
        .iter()
        .try_fold(0u64, |sum, &size| sum.checked_add(size))
        .ok_or_else(overflow)?;
    let data = stream.peek(total)?;
    let mut rest: &[u8] = &data;
    let mut bytes = Vec::new();
    for (index, &size) in sizes.iter().enumerate() {
        // `size` is at most `total`, which `peek` has found in memory.
        let (block, tail) = rest.split_at(size as usize);
        rest = tail;
        let is_last = index + 1 == sizes.len();
        let wanted = if is_last && last_bytes != 0 {
            last_bytes
        } else {
            block_bytes
        };
        decompress(compressor, block, wanted, &mut bytes)
            .map_err(|problem| VtkError::malformed(name, format!("block {index}: {problem}")))?;
    }
    Ok(bytes)
}

/// Appends a block of `wanted` bytes. The memory grows with what the block really holds.
fn decompress(
    compressor: Compressor,
    block: &[u8],
    wanted: u64,
    bytes: &mut Vec<u8>,
) -> Result<(), String> {
    let before = bytes.len();
    let limited = wanted.saturating_add(1);
    match compressor {
        Compressor::Zlib => {
            flate2::read::ZlibDecoder::new(block)
                .take(limited)
                .read_to_end(bytes)
                .map_err(|error| error.to_string())?;
        }
        Compressor::Lzma => {
            lzma_rust2::XzReader::new_mem_limit(block, false, LZMA_MEMORY_KIB)
                .take(limited)
                .read_to_end(bytes)
                .map_err(|error| error.to_string())?;
        }
        Compressor::Lz4 => {
            if wanted > LZ4_EXPANSION.saturating_mul(block.len() as u64 + 1) {
                return Err(format!("{} bytes cannot hold {wanted}", block.len()));
            }
            bytes.resize(before + wanted as usize, 0);
            let length = lz4_flex::block::decompress_into(block, &mut bytes[before..])
                .map_err(|error| error.to_string())?;
            bytes.truncate(before + length);
        }
    }
    let found = (bytes.len() - before) as u64;
    if found != wanted {
        return Err(format!(
            "it holds {found} bytes or more instead of {wanted}"
        ));
    }
    Ok(())
}

fn check_size(name: &str, declared: u64, expected: u64) -> Result<(), VtkError> {
    if declared != expected {
        let problem = format!("{declared} bytes are stored, {expected} belong to it");
        return Err(VtkError::malformed(name, problem));
    }
    Ok(())
}

fn words(bytes: &[u8], layout: Layout) -> Vec<u64> {
    let kind = if layout.word == 4 {
        Kind::U32
    } else {
        Kind::U64
    };
    // Both kinds are whole numbers.
    kind.indices(bytes, layout.order).unwrap_or_default()
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::io::Write as _;

    /// 64 zero bytes in XZ format, but with a dictionary of 4 GiB declared in the block header,
    /// whose checksum is right.
    const GREEDY_XZ: [u8; 68] = [
        0xfd, 0x37, 0x7a, 0x58, 0x5a, 0x00, 0x00, 0x04, 0xe6, 0xd6, 0xb4, 0x46, 0x02, 0x00, 0x21,
        0x01, 0x28, 0x00, 0x00, 0x00, 0xe6, 0xa0, 0x11, 0xb3, 0xe0, 0x00, 0x3f, 0x00, 0x06, 0x5d,
        0x00, 0x00, 0x6e, 0x58, 0x46, 0x98, 0x00, 0x00, 0x00, 0x00, 0x02, 0x24, 0x30, 0x16, 0xa5,
        0x7a, 0x54, 0xde, 0x00, 0x01, 0x22, 0x40, 0x9b, 0xb2, 0xe8, 0xf1, 0x1f, 0xb6, 0xf3, 0x7d,
        0x01, 0x00, 0x00, 0x00, 0x00, 0x04, 0x59, 0x5a,
    ];

    #[test]
    fn a_greedy_dictionary_is_refused() {
        let mut bytes = Vec::new();
        let problem = decompress(Compressor::Lzma, &GREEDY_XZ, 64, &mut bytes).unwrap_err();
        assert!(problem.contains("memory"), "{problem}");
        // The same stream with the 8 MiB of the usual setting.
        let mut modest = GREEDY_XZ;
        modest[16] = 22;
        modest[20..24].copy_from_slice(&[0x74, 0x2f, 0xe5, 0xa3]);
        decompress(Compressor::Lzma, &modest, 64, &mut bytes).unwrap();
        assert_eq!(bytes, [0; 64]);
    }

    #[test]
    fn a_block_that_swells_is_cut_off() {
        let mut encoder = flate2::write::ZlibEncoder::new(Vec::new(), flate2::Compression::best());
        encoder.write_all(&vec![0; 8 << 20]).unwrap();
        let bomb = encoder.finish().unwrap();
        let mut bytes = Vec::new();
        assert!(decompress(Compressor::Zlib, &bomb, 72, &mut bytes).is_err());
        assert!(bytes.capacity() < 1000);
    }

    #[test]
    fn pieces_of_base64_may_be_padded_or_not() {
        let layout = Layout {
            order: Order::Little,
            word: 4,
            compressor: None,
        };
        // Length 1 and the byte 7.
        for text in ["AQAAAAc=", "AQAAAAc"] {
            let source = Source::Base64(text.as_bytes());
            assert_eq!(*decode("a", source, layout, 1).unwrap(), [7]);
        }
        for text in ["AQAAAA==", "AgAAAAc=", "AQAA*Ac=", ""] {
            let source = Source::Base64(text.as_bytes());
            assert!(decode("a", source, layout, 1).is_err(), "{text}");
        }
    }
}
