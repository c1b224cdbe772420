//! A closed segment compressed, with an extract of it in front.
//!
//! Readbacks are nearly all of a segment, and much that is asked of a record is not about them:
//! which steps were carried out, when, and how the run ended. So the compressed file begins with
//! the extract: the segment's lines that are no readbacks, as they stand in the text. It lies in
//! a frame that Zstandard passes over (RFC 8878, section 3.1.2), so that `zstd -d` gives the
//! segment's text and nothing else. The text is the truth: whoever reads all of it holds the
//! extract against it.

use std::fs::File;
use std::io::{self, Read};
use std::path::Path;

/// How hard the text is compressed. The library's quickest ordinary level makes files of
/// readbacks no larger than its default does, and they are read back a fifth faster.
const COMPRESSION_LEVEL: i32 = 1;
/// What a damaged compressed segment may claim to hold before it is not believed.
const PLAIN_BYTES_MAX: u64 = 1 << 30;

/// How a frame begins that Zstandard passes over: RFC 8878 leaves the magic number's last four
/// bits free.
const EXTRACT_MAGIC: u32 = 0x184D_2A5E;
/// Bytes before a passed-over frame's content: the magic number and the content's length, both
/// with the lowest byte first.
const EXTRACT_HEAD: usize = 8;

/// The lines of a segment's text that are no readbacks, in order, each with its line end.
pub(crate) fn extract_of(plain: &[u8]) -> Vec<u8> {
    let mut extract = Vec::new();
    for line in plain.split_inclusive(|byte| *byte == b'\n') {
        if is_extracted(line) {
            extract.extend_from_slice(line);
        }
    }
    extract
}

/// Whether a line belongs into the extract.
#[inline]
pub(crate) fn is_extracted(line: &[u8]) -> bool {
    line.first() != Some(&b'[')
}

/// A segment's text as a compressed file.
pub(crate) fn pack(plain: &[u8]) -> io::Result<Vec<u8>> {
    let extract = frame(&extract_of(plain))?;
    let length = u32::try_from(extract.len())
        .map_err(|_| io::Error::other("the segment is too long to be compressed"))?;
    let mut packed = Vec::with_capacity(EXTRACT_HEAD + extract.len() + plain.len() / 3);
    packed.extend_from_slice(&EXTRACT_MAGIC.to_le_bytes());
    packed.extend_from_slice(&length.to_le_bytes());
    packed.extend_from_slice(&extract);
    packed.extend_from_slice(&frame(plain)?);
    Ok(packed)
}

fn frame(content: &[u8]) -> io::Result<Vec<u8>> {
    let mut compressor = zstd::bulk::Compressor::new(COMPRESSION_LEVEL)?;
    compressor.include_checksum(true)?;
    compressor.include_contentsize(true)?;
    compressor.compress(content)
}

/// The text of a compressed file, or what could be had of it and why not more.
pub(crate) fn unpack(packed: &[u8]) -> (Vec<u8>, Option<String>) {
    let frame = split(packed).map_or(packed, |(_, frame)| frame);
    if let Some(plain) = whole_frame(frame) {
        return (plain, None);
    }
    // Slowly, then: what comes before the damage is wanted to say where it is.
    let mut plain = Vec::new();
    let why = match zstd::stream::read::Decoder::new(frame) {
        Ok(decoder) => {
            let read = decoder.take(PLAIN_BYTES_MAX).read_to_end(&mut plain);
            read.err().map_or_else(
                || "the compressed file is not as it was written".to_owned(),
                |error| format!("the compressed file cannot be read on: {error}"),
            )
        }
        Err(error) => format!("the compressed file cannot be read: {error}"),
    };
    (plain, Some(why))
}

/// What a compressed file says of the lines that are no readbacks.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(crate) enum Extract {
    /// Nothing: it was written before there were extracts.
    Absent,
    /// Something that cannot be read.
    Damaged,
    /// Those lines.
    Lines(Vec<u8>),
}

impl Extract {
    /// From the bytes of a compressed file.
    pub(crate) fn of(packed: &[u8]) -> Self {
        match split(packed) {
            Some((extract, _)) => whole_frame(extract).map_or(Self::Damaged, Self::Lines),
            None => Self::Absent,
        }
    }

    /// From a compressed file, of which no more than the extract is read.
    ///
    /// # Errors
    /// What the disk says.
    pub(crate) fn load(path: &Path) -> io::Result<Self> {
        let mut file = File::open(path)?;
        let mut packed = vec![0; EXTRACT_HEAD];
        match file.read_exact(&mut packed) {
            Ok(()) => {}
            Err(error) if error.kind() == io::ErrorKind::UnexpectedEof => return Ok(Self::Absent),
            Err(error) => return Err(error),
        }
        let Some(length) = extract_length(&packed) else {
            return Ok(Self::Absent);
        };
        file.take(u64::from(length)).read_to_end(&mut packed)?;
        Ok(Self::of(&packed))
    }

    /// Whether it is what stands in the text.
    pub(crate) fn agrees_with(&self, lines: &[u8]) -> bool {
        match self {
            Self::Absent => true,
            Self::Damaged => false,
            Self::Lines(extracted) => extracted == lines,
        }
    }
}

/// The extract's frame and what follows it, if there is one.
fn split(packed: &[u8]) -> Option<(&[u8], &[u8])> {
    let length = usize::try_from(extract_length(packed)?).ok()?;
    let content = packed.get(EXTRACT_HEAD..)?;
    // Cut off within the extract there is no text at all.
    Some(content.split_at(length.min(content.len())))
}

fn extract_length(packed: &[u8]) -> Option<u32> {
    let (magic, rest) = packed.split_first_chunk()?;
    let (length, _) = rest.split_first_chunk()?;
    (u32::from_le_bytes(*magic) == EXTRACT_MAGIC).then(|| u32::from_le_bytes(*length))
}

/// What a frame holds, provided it is whole, and alone.
fn whole_frame(frame: &[u8]) -> Option<Vec<u8>> {
    let claimed = zstd::zstd_safe::get_frame_content_size(frame)
        .ok()
        .flatten()
        .filter(|size| *size <= PLAIN_BYTES_MAX)?;
    if zstd::zstd_safe::find_frame_compressed_size(frame) != Ok(frame.len()) {
        return None;
    }
    zstd::bulk::decompress(frame, usize::try_from(claimed).ok()?).ok()
}

#[cfg(test)]
mod tests {
    use super::*;

    const TEXT: &[u8] = b"{\"journal\":1}\n[1,2]\n{\"n\":2}\n[3]\n[4]\n";

    #[test]
    fn a_text_comes_back_with_its_extract() {
        let packed = pack(TEXT).expect("memory");
        assert_eq!(unpack(&packed), (TEXT.to_vec(), None));
        let extract = Extract::of(&packed);
        assert_eq!(
            extract,
            Extract::Lines(b"{\"journal\":1}\n{\"n\":2}\n".to_vec())
        );
        assert!(extract.agrees_with(&extract_of(TEXT)));
        assert!(!extract.agrees_with(b"{\"journal\":1}\n"));
    }

    #[test]
    fn an_ordinary_reader_of_the_format_sees_the_text_alone() {
        let packed = pack(TEXT).expect("memory");
        let plain = zstd::stream::decode_all(packed.as_slice()).expect("whole frames");
        assert_eq!(plain, TEXT);
    }

    #[test]
    fn a_file_without_an_extract_is_read_as_before() {
        let packed = frame(TEXT).expect("memory");
        assert_eq!(unpack(&packed), (TEXT.to_vec(), None));
        assert_eq!(Extract::of(&packed), Extract::Absent);
    }

    #[test]
    fn no_damaged_byte_goes_unseen() {
        let packed = pack(TEXT).expect("memory");
        let lines = extract_of(TEXT);
        for place in 0..packed.len() {
            let mut altered = packed.clone();
            altered[place] ^= 1;
            let seen = unpack(&altered).1.is_some() || !Extract::of(&altered).agrees_with(&lines);
            assert!(seen, "byte {place}");
        }
        for length in 0..packed.len() {
            assert!(unpack(&packed[..length]).1.is_some(), "{length} bytes");
        }
    }
}
