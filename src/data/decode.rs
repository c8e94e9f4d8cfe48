//! From a file's bytes to UTF-8: by its byte order mark, else as UTF-8 unless the spec names another
//! encoding. Nothing is guessed.

use crate::diagnostics::Fault;
use encoding_rs::{DecoderResult, Encoding, UTF_8, UTF_16BE, UTF_16LE};

/// How a file's bytes are to be read.
pub struct Reading {
    /// `None`: the bytes are UTF-8 themselves (checked where they are split into records).
    decoder: Option<encoding_rs::Decoder>,
    pub name: &'static str,
    /// Bytes of the mark, which belong to no cell.
    pub mark_bytes: usize,
}

/// Chooses by the first bytes of the file and the spec.
pub fn choose(first: &[u8], named: Option<&str>, file: &str) -> Result<Reading, Fault> {
    let marked = Encoding::for_bom(first);
    // The plan takes no name that is not known.
    let wanted = named.and_then(|label| Encoding::for_label(label.trim().as_bytes()));
    let (encoding, mark_bytes) = match (marked, wanted) {
        (Some((marked, _)), Some(wanted)) if marked != wanted => {
            let message = format!(
                "{file} starts with the mark of {}, but the spec says {}",
                marked.name(),
                wanted.name()
            );
            return Err(Fault::wrong("encoding-mark", message)
                .repair(format!("say encoding = \"{}\", or leave it out", marked.name().to_lowercase())));
        }
        (Some((marked, length)), _) => (marked, length),
        (None, Some(wanted)) => (wanted, 0),
        (None, None) => (UTF_8, 0),
    };
    if encoding != UTF_16LE && encoding != UTF_16BE && first.contains(&0) {
        return Err(Fault::wrong("not-text", format!("{file} holds zero bytes: it is not a text file"))
            .expected("CSV or TSV text; UTF-16 only with its byte order mark or named by `encoding`")
            .repair("export the table as CSV"));
    }
    let decoder = (encoding != UTF_8).then(|| encoding.new_decoder_without_bom_handling());
    Ok(Reading { decoder, name: encoding.name(), mark_bytes })
}

impl Reading {
    pub fn is_utf_8(&self) -> bool {
        self.decoder.is_none()
    }

    /// Appends the text of the next bytes (the mark left out); `Err` where they are no text in this
    /// encoding.
    pub fn decode(&mut self, mut bytes: &[u8], last: bool, into: &mut String) -> Result<(), ()> {
        let Some(decoder) = &mut self.decoder else {
            return Err(());
        };
        loop {
            into.reserve(bytes.len() + bytes.len() / 2 + 64);
            let (result, read) = decoder.decode_to_string_without_replacement(bytes, into, last);
            bytes = &bytes[read..];
            match result {
                DecoderResult::InputEmpty => return Ok(()),
                DecoderResult::OutputFull => {}
                DecoderResult::Malformed(..) => return Err(()),
            }
        }
    }
}
