//! The only code that reads a file. What is parsed and what is hashed are the same bytes, read once:
//! a file that changes between two looks cannot be stamped as something that it was not.
//!
//! Every error names the file as the user named it, and what was being done with it.

use crate::diagnostics::{Fault, Place};
use sha2::{Digest, Sha256};
use std::fs::{self, File};
use std::io::{ErrorKind, Read, Write};
use std::path::{Path, PathBuf};
use std::sync::Arc;
use std::sync::mpsc::{SyncSender, sync_channel};

/// Bytes read at a time by [`stream`].
pub const BLOCK_BYTES: usize = 1 << 20;

/// Blocks that may wait to be parsed before reading waits.
const BLOCKS_IN_FLIGHT: usize = 4;

/// The identity of the bytes that were read.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Hashed {
    /// SHA-256, lower-case hex.
    pub sha256: String,
    pub bytes: u64,
}

/// SHA-256 of bytes in memory, lower-case hex (FIPS 180-4).
pub fn sha256_hex(bytes: &[u8]) -> String {
    hex(&Sha256::digest(bytes))
}

fn hex(bytes: &[u8]) -> String {
    const DIGITS: &[u8; 16] = b"0123456789abcdef";
    let digit = |nibble: u8| char::from(DIGITS[usize::from(nibble & 15)]);
    bytes.iter().flat_map(|byte| [digit(byte >> 4), digit(*byte)]).collect()
}

/// A whole small file: a spec, a template, a stamp. `name` is what the user called it, `doing` what
/// it is read for ("reading the spec").
pub fn whole(path: &Path, name: &str, doing: &str) -> Result<Vec<u8>, Fault> {
    let mut file = open(path, name, doing)?;
    let mut bytes = Vec::new();
    file.read_to_end(&mut bytes).map_err(|error| unreadable(name, doing, &error))?;
    Ok(bytes)
}

/// What lies in a folder, sorted; nothing where it cannot be listed.
pub fn listed(folder: &Path) -> Vec<PathBuf> {
    let mut found: Vec<PathBuf> =
        fs::read_dir(folder).map(|all| all.flatten().map(|entry| entry.path()).collect()).unwrap_or_default();
    found.sort();
    found
}

/// The text of a file's bytes: strict UTF-8, a leading byte order mark left out.
pub fn text<'a>(bytes: &'a [u8], name: &str) -> Result<&'a str, Fault> {
    let bytes = bytes.strip_prefix(b"\xEF\xBB\xBF").unwrap_or(bytes);
    std::str::from_utf8(bytes).map_err(|error| {
        let at = error.valid_up_to();
        Fault::wrong("not-utf-8", format!("{name} is not UTF-8 text: byte {} does not belong", at + 1))
            .at(place_of_byte(bytes, at, name))
            .expected("UTF-8 text")
            .repair("save the file as UTF-8")
    })
}

/// The place of a byte, with its line shown as far as it can be read.
fn place_of_byte(bytes: &[u8], at: usize, name: &str) -> Place {
    let start = bytes[..at].iter().rposition(|b| *b == b'\n').map_or(0, |before| before + 1);
    let end = bytes[at..].iter().position(|b| *b == b'\n').map_or(bytes.len(), |length| at + length);
    let before = String::from_utf8_lossy(&bytes[start..at]).into_owned();
    let mark = before.len()..before.len() + char::REPLACEMENT_CHARACTER.len_utf8();
    Place {
        file: name.to_string(),
        line: bytes[..start].iter().filter(|b| **b == b'\n').count() as u64 + 1,
        column: before.chars().count() as u64 + 1,
        excerpt: format!("{before}{}", String::from_utf8_lossy(&bytes[at..end])),
        mark,
    }
}

/// Gives a file's bytes to `each`, block by block and in order, and returns the hash of these very
/// bytes. A file of more than one block is read and hashed on a second thread while `each` works; the
/// result does not depend on how the two take turns.
pub fn stream(path: &Path, name: &str, doing: &str, mut each: impl FnMut(&[u8])) -> Result<Hashed, Fault> {
    let mut file = open(path, name, doing)?;
    let read_error = |error: std::io::Error| unreadable(name, doing, &error);
    let mut first = vec![0; BLOCK_BYTES];
    let filled = fill(&mut file, &mut first).map_err(read_error)?;
    first.truncate(filled);
    if filled < BLOCK_BYTES {
        each(&first);
        return Ok(Hashed { sha256: sha256_hex(&first), bytes: filled as u64 });
    }
    let read = std::thread::scope(|scope| {
        let (send, blocks) = sync_channel(BLOCKS_IN_FLIGHT);
        let reader = scope.spawn(move || hash_and_send(file, first, &send));
        while let Ok(block) = blocks.recv() {
            let block: Arc<Vec<u8>> = block;
            each(&block);
        }
        reader.join()
    });
    match read {
        Ok(hashed) => hashed.map_err(read_error),
        Err(_) => Err(Fault::unreadable("unreadable-file", format!("hashing {name} broke off"))),
    }
}

/// Reads on from the first block, hashes every block and sends it.
fn hash_and_send(mut file: File, first: Vec<u8>, send: &SyncSender<Arc<Vec<u8>>>) -> std::io::Result<Hashed> {
    let mut state = Sha256::new();
    let mut bytes = 0;
    // Blocks take turns: one that the receiver has let go of is filled again.
    let mut ring: Vec<Arc<Vec<u8>>> = Vec::new();
    let mut turn = 0;
    let mut block = first;
    while !block.is_empty() {
        state.update(&block);
        bytes += block.len() as u64;
        let shared = Arc::new(block);
        if send.send(Arc::clone(&shared)).is_err() {
            break;
        }
        match ring.get_mut(turn) {
            Some(place) => *place = shared,
            None => ring.push(shared),
        }
        turn = (turn + 1) % (BLOCKS_IN_FLIGHT + 2);
        let used = ring.get_mut(turn).map(std::mem::take).and_then(|used| Arc::try_unwrap(used).ok());
        block = used.unwrap_or_default();
        block.resize(BLOCK_BYTES, 0);
        let filled = fill(&mut file, &mut block)?;
        block.truncate(filled);
    }
    Ok(Hashed { sha256: hex(&state.finalize()), bytes })
}

/// The hashes that a file would have with only LF, and with only CR LF, as line ends: to say of a
/// pinned file that differs whether nothing else does.
pub fn hashes_by_line_end(path: &Path, name: &str) -> Result<[String; 2], Fault> {
    let (mut with_lf, mut with_crlf) = (Sha256::new(), Sha256::new());
    let mut held_return = false;
    stream(path, name, "comparing line ends", |block| {
        let (mut lf, mut crlf) = (Vec::with_capacity(block.len() + 1), Vec::with_capacity(block.len() + 1));
        for byte in block {
            if held_return && *byte != b'\n' {
                lf.push(b'\r');
                crlf.push(b'\r');
            }
            held_return = *byte == b'\r';
            match byte {
                b'\r' => {}
                b'\n' => {
                    lf.push(b'\n');
                    crlf.extend(b"\r\n");
                }
                other => {
                    lf.push(*other);
                    crlf.push(*other);
                }
            }
        }
        with_lf.update(&lf);
        with_crlf.update(&crlf);
    })?;
    if held_return {
        with_lf.update(b"\r");
        with_crlf.update(b"\r");
    }
    Ok([hex(&with_lf.finalize()), hex(&with_crlf.finalize())])
}

/// Copies a file and returns the hash of the bytes that were written.
pub fn copy_hashed(from: &Path, to: &Path, name: &str) -> Result<Hashed, Fault> {
    let unwritable = |error: std::io::Error| {
        Fault::unreadable("unwritable-file", format!("copying {name} to {}: {error}", to.display()))
            .repair("look at the folder's permissions and the free space")
    };
    let mut copy = File::create(to).map_err(unwritable)?;
    let mut written = Ok(());
    let hashed = stream(from, name, "copying the input", |block| {
        if written.is_ok() {
            written = copy.write_all(block);
        }
    })?;
    written.and_then(|()| copy.flush()).map_err(unwritable)?;
    Ok(hashed)
}

fn open(path: &Path, name: &str, doing: &str) -> Result<File, Fault> {
    let file = File::open(path).map_err(|error| unreadable(name, doing, &error))?;
    let about = file.metadata().map_err(|error| unreadable(name, doing, &error))?;
    if about.is_dir() {
        return Err(Fault::unreadable("unreadable-file", format!("{doing} {name}: it is a folder"))
            .expected("a file"));
    }
    Ok(file)
}

fn unreadable(name: &str, doing: &str, error: &std::io::Error) -> Fault {
    let (why, repair) = match error.kind() {
        ErrorKind::NotFound => {
            ("there is no such file".to_string(), "mend the path; paths are relative to the spec")
        }
        ErrorKind::PermissionDenied => {
            ("reading it is not permitted".to_string(), "give leave to read the file")
        }
        // The operating system's own words differ between machines; the kind does not.
        kind => (kind.to_string(), "make the file readable"),
    };
    Fault::unreadable("unreadable-file", format!("{doing} {name}: {why}")).repair(repair)
}

/// Fills the buffer as far as the file goes; fewer bytes than it holds mean the end of the file.
fn fill(file: &mut File, buffer: &mut [u8]) -> std::io::Result<usize> {
    let mut filled = 0;
    while filled < buffer.len() {
        match file.read(&mut buffer[filled..]) {
            Ok(0) => break,
            Ok(n) => filled += n,
            Err(error) if error.kind() == ErrorKind::Interrupted => {}
            Err(error) => return Err(error),
        }
    }
    Ok(filled)
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::path::PathBuf;

    fn scratch(name: &str, bytes: &[u8]) -> PathBuf {
        let path = std::env::temp_dir().join(format!("reassay-source-{}-{name}", std::process::id()));
        std::fs::write(&path, bytes).unwrap();
        path
    }

    /// FIPS 180-4's example "abc", and the empty message.
    #[test]
    fn known_hashes() {
        assert_eq!(sha256_hex(b"abc"), "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad");
        assert_eq!(sha256_hex(b""), "e3b0c44298fc1c149afbf4c8996fb92427ae41e4649b934ca495991b7852b855");
    }

    #[test]
    fn the_streamed_bytes_are_the_hashed_bytes() {
        for length in [0, 1, BLOCK_BYTES - 1, BLOCK_BYTES, BLOCK_BYTES + 1, 9 * BLOCK_BYTES + 17] {
            let bytes: Vec<u8> = (0..length).map(|i| ((i * 7919) >> 3) as u8).collect();
            let path = scratch(&format!("stream-{length}"), &bytes);
            let mut seen = Vec::new();
            let hashed = stream(&path, "x", "reading", |block| seen.extend_from_slice(block)).unwrap();
            std::fs::remove_file(&path).unwrap();
            assert!(seen == bytes);
            assert_eq!(hashed.sha256, sha256_hex(&bytes));
            assert_eq!(hashed.bytes, length as u64);
        }
    }

    #[test]
    fn a_missing_file_is_named_with_what_was_being_done() {
        let fault = whole(Path::new("no/such/file"), "wells.csv", "reading the readings").unwrap_err();
        assert_eq!(fault.message, "reading the readings wells.csv: there is no such file");
        assert_eq!(fault.cause, crate::diagnostics::Cause::Unreadable);
    }

    #[test]
    fn line_ends_are_told_from_content() {
        let path = scratch("ends", b"a\r\nb\rc\r\n\r");
        let [lf, crlf] = hashes_by_line_end(&path, "x").unwrap();
        std::fs::remove_file(&path).unwrap();
        assert_eq!(lf, sha256_hex(b"a\nb\rc\n\r"));
        assert_eq!(crlf, sha256_hex(b"a\r\nb\rc\r\n\r"));
    }

    #[test]
    fn text_that_is_not_utf_8_is_placed() {
        let fault = text(b"first\nm\xB2 x\n", "spec.toml").unwrap_err();
        let place = fault.place.unwrap();
        assert_eq!((place.line, place.column, place.excerpt.as_str()), (2, 2, "m\u{FFFD} x"));
        assert_eq!(text(b"\xEF\xBB\xBFa", "x").unwrap(), "a");
    }

    #[test]
    fn a_copy_has_the_hash_of_what_was_read() {
        let from = scratch("from", b"1,2\n");
        let to = from.with_extension("copy");
        let hashed = copy_hashed(&from, &to, "x").unwrap();
        assert_eq!(std::fs::read(&to).unwrap(), b"1,2\n");
        assert_eq!(hashed.sha256, sha256_hex(b"1,2\n"));
        std::fs::remove_file(from).unwrap();
        std::fs::remove_file(to).unwrap();
    }
}
