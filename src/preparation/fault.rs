//! From errors of the JSON reader to findings with a JSON pointer.

use crate::finding::Finding;

/// Pointer to an output.
pub(super) fn output_pointer(key: &str) -> String {
    format!("/outputs/{}", escaped(key))
}

/// RFC 6901: `~` and `/` inside a token.
fn escaped(token: &str) -> String {
    token.replace('~', "~0").replace('/', "~1")
}

/// A list where an object belongs.
pub(super) fn not_an_object(pointer: &str) -> Finding {
    Finding::error("invalid_value", "a list stands where an object belongs")
        .at_pointer(pointer)
        .found("a list")
        .expected("an object with named fields")
}

/// The finding of an error met while reading `text`, which stands at `base` in the document: code
/// `invalid_json` with its line, else a code with a JSON pointer.
#[must_use]
pub fn of_json(text: &str, base: &str, error: &serde_json::Error) -> Finding {
    let shown = error.to_string();
    let message = shown
        .rfind(" at line ")
        .map_or(shown.as_str(), |end| &shown[..end]);
    if !error.is_data() {
        let line = u64::try_from(error.line()).unwrap_or(u64::MAX);
        return Finding::error("invalid_json", format!("the text is no JSON: {message}"))
            .at_line(line)
            .at_column(error.column().to_string());
    }
    let code = [
        ("unknown field", "unknown_field"),
        ("unknown variant", "unknown_step"),
        ("missing field", "missing_field"),
    ]
    .into_iter()
    .find(|(start, _)| message.starts_with(start))
    .map_or("invalid_value", |(_, code)| code);
    let offset = offset(text, error.line(), error.column());
    let pointer = pointer_at(text, offset, code == "missing_field");
    let finding = Finding::error(code, message).at_pointer(format!("{base}{pointer}"));
    match message.split_once(", expected ") {
        Some((_, expected)) => finding.expected(expected),
        None => finding,
    }
}

/// Byte offset of the last byte that the reader had consumed.
fn offset(text: &str, line: usize, column: usize) -> usize {
    let start: usize = text
        .split_inclusive('\n')
        .take(line.saturating_sub(1))
        .map(str::len)
        .sum();
    (start + column).saturating_sub(1)
}

/// Pointer to the value that holds the byte at `offset`, or to the object around it.
fn pointer_at(text: &str, offset: usize, object: bool) -> String {
    enum Frame {
        Object(Option<String>),
        Array(usize),
    }
    let bytes = text.as_bytes();
    let mut frames: Vec<Frame> = Vec::new();
    let mut i = 0;
    while i < offset.min(bytes.len()) {
        match bytes[i] {
            b'{' => frames.push(Frame::Object(None)),
            b'[' => frames.push(Frame::Array(0)),
            b'}' | b']' => drop(frames.pop()),
            b',' => match frames.last_mut() {
                Some(Frame::Array(n)) => *n += 1,
                Some(Frame::Object(key)) => *key = None,
                None => {}
            },
            b'"' => {
                let start = i;
                i += 1;
                while i < bytes.len() && bytes[i] != b'"' {
                    i += if bytes[i] == b'\\' { 2 } else { 1 };
                }
                if let Some(Frame::Object(key @ None)) = frames.last_mut() {
                    *key = text
                        .get(start..=i)
                        .and_then(|token| serde_json::from_str(token).ok());
                }
            }
            _ => {}
        }
        i += 1;
    }
    if object && let Some(Frame::Object(key)) = frames.last_mut() {
        *key = None;
    }
    frames
        .iter()
        .filter_map(|frame| match frame {
            Frame::Object(key) => key.as_deref().map(|key| format!("/{}", escaped(key))),
            Frame::Array(n) => Some(format!("/{n}")),
        })
        .collect()
}
