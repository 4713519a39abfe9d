//! The checksum by which the result names its inputs.

use std::fs::File;
use std::io::Read;
use std::path::Path;

use sha2::{Digest, Sha256};

use super::error::FitsError;

const DIGITS: &[u8; 16] = b"0123456789abcdef";

/// The SHA-256 of a file, in lower-case hexadecimal; the file is streamed.
///
/// # Errors
///
/// [`FitsError::Io`] when it cannot be read.
pub fn sha256(path: &Path) -> Result<String, FitsError> {
    let io_error = |it: std::io::Error| FitsError::io(path, "read", &it);
    let mut file = File::open(path).map_err(io_error)?;
    let mut hash = Sha256::new();
    let mut buffer = vec![0u8; 1 << 20];
    loop {
        match file.read(&mut buffer).map_err(io_error)? {
            0 => break,
            count => hash.update(&buffer[..count]),
        }
    }
    Ok(hexadecimal(&hash.finalize()))
}

/// The SHA-256 of bytes in memory, in lower-case hexadecimal.
pub fn sha256_of(bytes: &[u8]) -> String {
    hexadecimal(&Sha256::digest(bytes))
}

fn hexadecimal(digest: &[u8]) -> String {
    let mut text = String::with_capacity(2 * digest.len());
    for byte in digest {
        text.push(char::from(DIGITS[usize::from(byte >> 4)]));
        text.push(char::from(DIGITS[usize::from(byte & 15)]));
    }
    text
}

#[cfg(test)]
mod tests {
    // FIPS 180-2, appendix B.1: the digest of "abc".
    #[test]
    fn digest_of_abc() {
        let file = tempfile::NamedTempFile::new().unwrap();
        std::fs::write(file.path(), "abc").unwrap();
        assert_eq!(
            super::sha256(file.path()).unwrap(),
            super::sha256_of(b"abc")
        );
        assert_eq!(
            super::sha256_of(b"abc"),
            "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"
        );
    }
}
