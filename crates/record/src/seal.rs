//! The first and the last line of a file whose content must be known to be whole.
//!
//! First line `// armilla <what>, format <version>`, last line `// sha256 of all lines above: <64 hex
//! digits>`: comments to every RON reader. A cut, an edit or a flipped bit anywhere no longer fits the
//! sum, also inside a number that would still be a number.

use std::io::{self, BufWriter, Write};
use std::path::Path;

use sha2::{Digest, Sha256};

use crate::RecordError;

const SUM: &str = "// sha256 of all lines above: ";
/// Lower-case hexadecimal digits of a SHA-256 sum.
const SUM_DIGITS: usize = 64;

/// The first line of every file of armilla that is not a table or a figure.
pub(crate) fn head(what: &str, format: u32) -> String {
    format!("// armilla {what}, format {format}\n")
}

/// Whether a file begins as one of armilla, of whatever format version.
pub(crate) fn has_head(what: &str, bytes: &[u8]) -> bool {
    bytes.starts_with(format!("// armilla {what}, format ").as_bytes())
}

/// The sum of some bytes as lower-case hexadecimal digits.
pub(crate) fn hex_sum(bytes: &[u8]) -> String {
    hex(&Sha256::digest(bytes))
}

fn hex(digest: &[u8]) -> String {
    digest.iter().map(|byte| format!("{byte:02x}")).collect()
}

/// Passes bytes on while summing them.
struct Summing<'a> {
    out: &'a mut dyn Write,
    sum: Sha256,
}

impl Write for Summing<'_> {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        let written = self.out.write(bytes)?;
        self.sum.update(&bytes[..written]);
        Ok(written)
    }

    fn flush(&mut self) -> io::Result<()> {
        self.out.flush()
    }
}

/// Writes head, body and sum.
pub(crate) fn write_sealed(
    out: &mut dyn Write,
    head: &str,
    body: impl FnOnce(&mut dyn Write) -> io::Result<()>,
) -> io::Result<()> {
    let mut buffer = BufWriter::new(Summing { out, sum: Sha256::new() });
    buffer.write_all(head.as_bytes())?;
    body(&mut buffer)?;
    let Summing { out, sum } = buffer.into_inner().map_err(io::IntoInnerError::into_error)?;
    writeln!(out, "{SUM}{}", hex(&sum.finalize()))
}

/// The text of a sealed file, head and sum included, once both are found right.
///
/// # Errors
/// [`RecordError::Malformed`] for a file that begins otherwise, [`RecordError::Format`] for a version
/// later than this one knows, [`RecordError::Damaged`] for a sum that is missing or does not fit.
pub(crate) fn open_sealed<'a>(path: &Path, bytes: &'a [u8], what: &str, known: u32) -> Result<&'a str, RecordError> {
    let damaged = |what| RecordError::Damaged { path: path.to_path_buf(), what };
    let found = head_format(bytes, what).ok_or_else(|| RecordError::Malformed {
        path: path.to_path_buf(),
        line: 1,
        column: 1,
        what: format!("the first line must be `{}`", head(what, known).trim_end()),
    })?;
    let body = match split_sum(bytes) {
        Some((body, sum)) if hex_sum(body).as_bytes() == sum => Some(body),
        Some(_) => return Err(damaged("the sum in its last line does not fit the lines above")),
        None => None,
    };
    // A later format may be sealed in another way, so its version is told before a missing sum is.
    if found == 0 || found > known {
        return Err(RecordError::Format { path: path.to_path_buf(), found, known });
    }
    if body.is_none() {
        return Err(damaged("its last line, which holds the sum over all others, is missing or incomplete"));
    }
    std::str::from_utf8(bytes).map_err(|_| damaged("it is not text"))
}

/// The format version in the first line.
fn head_format(bytes: &[u8], what: &str) -> Option<u32> {
    let line = bytes.split(|&byte| byte == b'\n').next()?;
    let line = std::str::from_utf8(line).ok()?;
    line.strip_prefix(&format!("// armilla {what}, format "))?.parse().ok()
}

/// Everything before the last line, and the digits in it.
fn split_sum(bytes: &[u8]) -> Option<(&[u8], &[u8])> {
    let length = SUM.len() + SUM_DIGITS + 1;
    let (body, line) = bytes.split_at(bytes.len().checked_sub(length)?);
    let digits = line.strip_prefix(SUM.as_bytes())?.strip_suffix(b"\n")?;
    body.ends_with(b"\n").then_some((body, digits))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn sealed(text: &str, format: u32) -> Vec<u8> {
        let mut out = Vec::new();
        write_sealed(&mut out, &head("trial", format), |out| out.write_all(text.as_bytes())).expect("memory");
        out
    }

    /// Outside: FIPS 180-2 (2002), appendix B.1, the sum of "abc".
    #[test]
    fn the_sum_is_sha256() {
        let published = "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad";
        assert_eq!(hex_sum(b"abc"), published);
    }

    #[test]
    fn every_flipped_bit_and_every_cut_is_found() {
        let whole = sealed("(1, 2.5)\n", 1);
        let open = |bytes: &[u8]| open_sealed(Path::new("x.ron"), bytes, "trial", 1).map(str::len);
        open(&whole).expect("the whole file");
        for k in 0..whole.len() {
            open(&whole[..k]).expect_err("a cut file");
            for bit in 0..8 {
                let mut flipped = whole.clone();
                flipped[k] ^= 1 << bit;
                open(&flipped).expect_err("a flipped bit");
            }
        }
    }

    #[test]
    fn a_later_format_is_named_whether_sealed_or_not() {
        for bytes in [sealed("(later: true)\n", 2), b"// armilla trial, format 2\nelse".to_vec()] {
            let error = open_sealed(Path::new("x.ron"), &bytes, "trial", 1).expect_err("format 2");
            assert!(matches!(error, RecordError::Format { found: 2, known: 1, .. }), "{error:?}");
        }
    }
}
