//! SHA256SUMS, in the form that `sha256sum -c --strict` reads: 64 lower-case hex digits, two spaces,
//! the path; one line a file, sorted by path.

/// The text of the file. Paths have no backslash and no line end ([`crate::stamp::inputs`]), so no line
/// needs an escape.
pub fn write<'a>(files: impl Iterator<Item = (&'a str, String)>) -> String {
    let mut lines: Vec<(&str, String)> = files.collect();
    lines.sort_by(|a, b| a.0.cmp(b.0));
    lines.iter().map(|(path, sha256)| format!("{sha256}  {path}\n")).collect()
}

/// The paths and hashes of the file, or what is wrong with it. Only what [`write()`] gives is read: a
/// changed line end, order or letter case is a change of the file.
pub fn read(bytes: &[u8]) -> Result<Vec<(String, String)>, String> {
    let text = std::str::from_utf8(bytes)
        .map_err(|error| format!("byte {} is not UTF-8", error.valid_up_to() + 1))?;
    let mut files: Vec<(String, String)> = Vec::new();
    for (place, line) in text.split_inclusive('\n').enumerate() {
        let wrong = |what: &str| format!("line {}: {what}", place + 1);
        let line = line.strip_suffix('\n').ok_or_else(|| wrong("no line end"))?;
        let (sha256, path) = line.split_once("  ").ok_or_else(|| wrong("no two spaces after the hash"))?;
        if sha256.len() != 64 || !sha256.bytes().all(|b| matches!(b, b'0'..=b'9' | b'a'..=b'f')) {
            return Err(wrong("no SHA-256 in lower-case hex"));
        }
        let strange = |part: &str| part.is_empty() || part == "." || part == "..";
        if path.split('/').any(strange) || path.contains(['\\', '\r']) {
            return Err(wrong("the path leads out of the folder or is none"));
        }
        if files.last().is_some_and(|(before, _)| before.as_str() >= path) {
            return Err(wrong("not in the order of the paths"));
        }
        files.push((path.to_string(), sha256.to_string()));
    }
    Ok(files)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::source::sha256_hex;

    #[test]
    fn what_is_written_is_read() {
        let files = [("report.md", sha256_hex(b"a")), ("figures/x y.svg", sha256_hex(b"b"))];
        let text = write(files.iter().map(|(path, sha256)| (*path, sha256.clone())));
        let lines: Vec<&str> = text.lines().collect();
        assert_eq!(lines[0], format!("{}  figures/x y.svg", sha256_hex(b"b")));
        let read = read(text.as_bytes()).unwrap();
        assert_eq!(read[1], ("report.md".to_string(), sha256_hex(b"a")));
    }

    #[test]
    fn anything_else_is_refused_with_its_line() {
        let hash = sha256_hex(b"a");
        let wrong = |text: String| read(text.as_bytes()).unwrap_err();
        assert_eq!(wrong(format!("{hash}  a")), "line 1: no line end");
        assert_eq!(wrong(format!("{hash} a\n")), "line 1: no two spaces after the hash");
        assert_eq!(wrong(format!("{}  a\n", hash.to_uppercase())), "line 1: no SHA-256 in lower-case hex");
        assert_eq!(wrong(format!("{hash}  ../a\n")), "line 1: the path leads out of the folder or is none");
        assert_eq!(wrong(format!("{hash}  /a\n")), "line 1: the path leads out of the folder or is none");
        assert_eq!(wrong(format!("{hash}  b\n{hash}  a\n")), "line 2: not in the order of the paths");
        assert_eq!(wrong(format!("{hash}  a\n{hash}  a\n")), "line 2: not in the order of the paths");
    }
}
