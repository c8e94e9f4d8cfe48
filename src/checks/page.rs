//! The user's page of a check is the head comment of its file; this takes it out of the text.

/// The leading comment block of a source text: its first lines that begin with the
/// inner-document mark. Runs while the program is compiled, so the pages are part of the binary.
pub const fn head(text: &'static str) -> &'static str {
    let bytes = text.as_bytes();
    let mut end = 0;
    while end + 2 < bytes.len() && bytes[end] == b'/' && bytes[end + 1] == b'/' && bytes[end + 2] == b'!' {
        while end < bytes.len() && bytes[end] != b'\n' {
            end += 1;
        }
        if end < bytes.len() {
            end += 1;
        }
    }
    text.split_at(end).0
}

/// The block without its comment marks.
pub fn plain(block: &str) -> String {
    let mut text = String::with_capacity(block.len());
    for line in block.lines() {
        let line = line.strip_prefix("//!").unwrap_or(line);
        text.push_str(line.strip_prefix(' ').unwrap_or(line));
        text.push('\n');
    }
    text
}
