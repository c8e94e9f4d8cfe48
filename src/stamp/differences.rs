//! Where two versions of a file part, in one line: the first differing key of JSON with both values and
//! their distance, the first differing line of any other text, the first differing byte of the rest.

use crate::json::Json;

/// Characters of a value or a line that are shown.
const SHOWN: usize = 60;

/// How the bytes in the folder differ from those made again; `None` where they are the same.
pub fn between(path: &str, here: &[u8], again: &[u8]) -> Option<String> {
    if here == again {
        return None;
    }
    if path.ends_with(".json")
        && let (Ok(here), Ok(again)) = (Json::read(here), Json::read(again))
        && let Some(difference) = in_json(&here, &again, "")
    {
        return Some(difference);
    }
    Some(match (std::str::from_utf8(here), std::str::from_utf8(again)) {
        (Ok(here), Ok(again)) => in_lines(here, again),
        _ => {
            let at = here.iter().zip(again).take_while(|(a, b)| a == b).count();
            format!("byte {} ({} bytes here, {} made again)", at + 1, here.len(), again.len())
        }
    })
}

/// The first key, in the order of the file, whose values differ.
fn in_json(here: &Json, again: &Json, way: &str) -> Option<String> {
    match (here, again) {
        (Json::Object(own), Json::Object(other)) => {
            let inner = |key: &str| if way.is_empty() { key.to_string() } else { format!("{way}.{key}") };
            for (key, value) in own {
                match again.get(key) {
                    Some(made) => {
                        if let Some(difference) = in_json(value, made, &inner(key)) {
                            return Some(difference);
                        }
                    }
                    None => {
                        return Some(format!(
                            "{}: {} here, not there when made again",
                            inner(key),
                            short(value)
                        ));
                    }
                }
            }
            let more = other.iter().find(|(key, _)| here.get(key).is_none());
            more.map(|(key, value)| format!("{}: not here, {} made again", inner(key), short(value)))
        }
        (Json::List(own), Json::List(other)) => {
            let both = own.iter().zip(other).enumerate();
            let first =
                both.map(|(at, (a, b))| in_json(a, b, &format!("{way}[{at}]"))).find_map(|found| found);
            first.or_else(|| {
                (own.len() != other.len())
                    .then(|| format!("{way}: {} items here, {} made again", own.len(), other.len()))
            })
        }
        _ if here == again => None,
        _ => {
            let by = match (here.as_f64(), again.as_f64()) {
                (Some(a), Some(b)) => format!(" (by {:e})", (a - b).abs()),
                _ => String::new(),
            };
            Some(format!("{way}: {} here, {} made again{by}", short(here), short(again)))
        }
    }
}

fn short(value: &Json) -> String {
    clipped(&value.to_line())
}

fn clipped(text: &str) -> String {
    let mut text: String = text.chars().map(|c| if c.is_control() { '\u{fffd}' } else { c }).collect();
    if let Some((cut, _)) = text.char_indices().nth(SHOWN) {
        text.truncate(cut);
        text.push('…');
    }
    text
}

fn in_lines(here: &str, again: &str) -> String {
    let (mut own, mut other) = (here.split_inclusive('\n'), again.split_inclusive('\n'));
    let mut line = 1;
    loop {
        match (own.next(), other.next()) {
            (Some(a), Some(b)) if a == b => line += 1,
            (Some(a), Some(b)) => {
                let (from_a, from_b) = (around(a, b), around(b, a));
                return format!("line {line}: \"{from_a}\" here, \"{from_b}\" made again");
            }
            (Some(a), None) => {
                return format!("line {line}: \"{}\" here, the end made again", clipped(a.trim_end()));
            }
            (None, Some(b)) => {
                return format!("line {line}: the end here, \"{}\" made again", clipped(b.trim_end()));
            }
            (None, None) => return "the bytes".to_string(),
        }
    }
}

/// The part of a long line that holds its first difference from the other.
fn around(line: &str, other: &str) -> String {
    let same = line.chars().zip(other.chars()).take_while(|(a, b)| a == b).count();
    let skipped = same.saturating_sub(SHOWN / 2);
    let start = if skipped > 0 { "…" } else { "" };
    let rest: String = line.trim_end_matches('\n').chars().skip(skipped).collect();
    format!("{start}{}", clipped(&rest))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_first_differing_key_is_named_with_both_values() {
        let here = b"{\"series\": [{\"name\": \"A\", \"chance\": 0.25}], \"x\": 1}";
        let again = b"{\"series\": [{\"name\": \"A\", \"chance\": 0.75}], \"x\": 2}";
        assert_eq!(between("a.json", here, here), None);
        assert_eq!(
            between("a.json", here, again).unwrap(),
            "series[0].chance: 0.25 here, 0.75 made again (by 5e-1)"
        );
        assert_eq!(between("a.json", b"{\"a\": 1}", b"{}").unwrap(), "a: 1 here, not there when made again");
        assert_eq!(between("a.json", b"{}", b"{\"a\": 1}").unwrap(), "a: not here, 1 made again");
        assert_eq!(between("a.json", b"[1]", b"[1, 2]").unwrap(), ": 1 items here, 2 made again");
        // The same values, laid out in another way.
        assert_eq!(
            between("a.json", b"{\"a\":1}", b"{\"a\": 1}").unwrap(),
            "line 1: \"{\"a\":1}\" here, \"{\"a\": 1}\" made again"
        );
    }

    #[test]
    fn the_first_differing_line_is_named() {
        assert_eq!(
            between("a.md", b"a\nb\nc\n", b"a\nB\nc\n").unwrap(),
            "line 2: \"b\" here, \"B\" made again"
        );
        assert_eq!(between("a.md", b"a\n", b"a\nb\n").unwrap(), "line 2: the end here, \"b\" made again");
        assert_eq!(
            between("a.md", b"a\r\n", b"a\n").unwrap(),
            "line 1: \"a\u{fffd}\" here, \"a\" made again"
        );
        let long = "x".repeat(300);
        let difference =
            between("a.html", format!("{long}1").as_bytes(), format!("{long}2").as_bytes()).unwrap();
        assert!(difference.ends_with("xxx2\" made again"), "{difference}");
        assert_eq!(between("a.bin", b"\xff1", b"\xff2").unwrap(), "byte 2 (2 bytes here, 2 made again)");
    }
}
