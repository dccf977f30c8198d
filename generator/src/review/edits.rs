//! What a person changed in a generated file, named by constant and function.
//!
//! In: the text that the program would write and the text on disk. Rust is read
//! back through its own grammar; C by its macros, declarations and functions;
//! circuit languages line by line.
//!
//! Not here: whether a file was changed at all, which its digest says.

use quote::ToTokens;

/// One difference.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Edit {
    /// Line in the text on disk, from 1.
    pub line: usize,
    /// For example `constant onset::FROM -60.0 to -61.0`.
    pub text: String,
}

/// One named piece of a file.
struct Piece {
    kind: &'static str,
    name: String,
    /// Text by which two pieces are compared; blanks and comments do not count.
    body: String,
    /// True if `body` is short enough to be shown.
    shown: bool,
}

/// Differences of `found` against `expected`; at least one where the texts differ.
#[must_use]
pub fn differences(language: &str, expected: &str, found: &str) -> Vec<Edit> {
    if expected == found {
        return Vec::new();
    }
    let first = first_line(expected, found);
    let (before, after) = match language {
        "rust" => match (rust(expected), rust(found)) {
            (Ok(before), Ok(after)) => (before, after),
            (_, Err(cause)) | (Err(cause), _) => {
                return vec![Edit { line: first, text: format!("it can no longer be read: {cause}") }];
            }
        },
        "c" => (c(expected), c(found)),
        _ => return line_edits(expected, found),
    };
    let mut edits = Vec::new();
    for piece in &after {
        let same = |other: &&Piece| other.kind == piece.kind && other.name == piece.name;
        let line = line_of(found, &piece.name).unwrap_or(first);
        match before.iter().find(same) {
            None => edits.push(Edit { line, text: format!("{} {} is new", piece.kind, piece.name) }),
            Some(other) if other.body == piece.body => {}
            Some(other) if piece.shown && other.shown => edits.push(Edit {
                line,
                text: format!("{} {} {} to {}", piece.kind, piece.name, other.body, piece.body),
            }),
            Some(_) => edits.push(Edit { line, text: format!("{} {} changed", piece.kind, piece.name) }),
        }
    }
    for piece in &before {
        if !after.iter().any(|other| other.kind == piece.kind && other.name == piece.name) {
            edits.push(Edit { line: first, text: format!("{} {} is gone", piece.kind, piece.name) });
        }
    }
    if edits.is_empty() {
        edits.push(Edit { line: first, text: "comments or layout changed".to_owned() });
    }
    edits
}

/// First line, from 1, in which two texts differ.
fn first_line(expected: &str, found: &str) -> usize {
    let mut theirs = found.lines();
    let same = expected.lines().take_while(|line| theirs.next() == Some(line)).count();
    same + 1
}

fn line_edits(expected: &str, found: &str) -> Vec<Edit> {
    let line = first_line(expected, found);
    let show = |text: &str| text.lines().nth(line - 1).unwrap_or("nothing").trim().to_owned();
    vec![Edit { line, text: format!("`{}` to `{}`", show(expected), show(found)) }]
}

/// Line of a piece, by the last part of its name behind the parts before it.
fn line_of(text: &str, name: &str) -> Option<usize> {
    let mut from = 0;
    for part in name.split("::") {
        let rest = text.get(from..)?;
        let at = rest.match_indices(part).map(|(at, _)| at).find(|&at| {
            let letter = |c: char| c.is_alphanumeric() || c == '_';
            let before = rest.get(..at).and_then(|t| t.chars().next_back());
            let after = rest.get(at + part.len()..).and_then(|t| t.chars().next());
            // A name inside a comment is passed over: its line starts with a slash or a star.
            let line = rest.get(..at).and_then(|t| t.rsplit('\n').next()).unwrap_or("").trim_start();
            !before.is_some_and(letter) && !after.is_some_and(letter) && !line.starts_with(['/', '*'])
        })?;
        from += at;
    }
    Some(text.get(..from)?.matches('\n').count() + 1)
}

fn rust(text: &str) -> Result<Vec<Piece>, String> {
    let file = syn::parse_file(text).map_err(|e| e.to_string())?;
    let mut out = Vec::new();
    rust_items("", file.items, &mut out);
    Ok(out)
}

fn rust_items(prefix: &str, items: Vec<syn::Item>, out: &mut Vec<Piece>) {
    for item in items {
        let mut push = |kind, name: String, body: String, shown| {
            out.push(Piece { kind, name: format!("{prefix}{name}"), body, shown });
        };
        match item {
            syn::Item::Const(item) => {
                let body = compact(&item.expr.to_token_stream().to_string());
                push("constant", item.ident.to_string(), body, true);
            }
            syn::Item::Fn(mut item) => {
                item.attrs.clear();
                let name = item.sig.ident.to_string();
                push("function", name, item.to_token_stream().to_string(), false);
            }
            syn::Item::Mod(item) => {
                let inner = format!("{prefix}{}::", item.ident);
                match item.content {
                    Some((_, items)) => rust_items(&inner, items, out),
                    None => push("module", item.ident.to_string(), String::new(), false),
                }
            }
            syn::Item::Enum(mut item) => {
                item.attrs.clear();
                for variant in &mut item.variants {
                    variant.attrs.clear();
                }
                let name = item.ident.to_string();
                push("type", name, item.to_token_stream().to_string(), false);
            }
            other => {
                let body = other.to_token_stream().to_string();
                let name: String = body.chars().take(40).collect();
                push("item", name, body, false);
            }
        }
    }
}

/// A token text without the blanks that separate a sign or bracket.
fn compact(text: &str) -> String {
    text.replace("- ", "-").replace("[ ", "[").replace(" ]", "]").replace(" ,", ",")
}

fn c(text: &str) -> Vec<Piece> {
    let text = without_comments(text);
    let mut out = Vec::new();
    let mut code = String::new();
    for line in text.lines() {
        let bare = line.trim();
        if let Some(rest) = bare.strip_prefix("#define ") {
            let (name, value) = rest.trim().split_once(char::is_whitespace).unwrap_or((rest, ""));
            let body = value.trim().trim_start_matches('(').trim_end_matches(')').to_owned();
            out.push(Piece { kind: "macro", name: name.to_owned(), body, shown: true });
        } else if bare.starts_with('#') {
            out.push(Piece { kind: "directive", name: bare.to_owned(), body: bare.to_owned(), shown: false });
        } else {
            code.push_str(line);
            code.push(' ');
        }
    }
    let mut chunk = String::new();
    let mut depth = 0_usize;
    for letter in code.chars() {
        chunk.push(letter);
        match letter {
            '{' if depth == 0 && normal(&chunk) == "extern \"C\" {" => chunk.clear(),
            '{' => depth += 1,
            '}' if depth == 0 => chunk.clear(),
            '}' => {
                depth -= 1;
                let head = chunk.split('{').next().unwrap_or("").trim_end();
                if depth == 0 && head.ends_with(')') {
                    c_piece(&chunk, &mut out);
                    chunk.clear();
                }
            }
            ';' if depth == 0 => {
                c_piece(&chunk, &mut out);
                chunk.clear();
            }
            _ => {}
        }
    }
    if !chunk.trim().is_empty() {
        c_piece(&chunk, &mut out);
    }
    out
}

fn c_piece(chunk: &str, out: &mut Vec<Piece>) {
    let body = normal(chunk);
    let head = body.split(['{', ';', '=', '[']).next().unwrap_or("");
    let named = if body.starts_with("typedef") { body.as_str() } else { head };
    let named = match named.split_once('(') {
        Some((before, _)) if !body.starts_with("typedef") => before,
        _ => named.trim_end_matches(';'),
    };
    let word = |c: char| !(c.is_alphanumeric() || c == '_');
    let name = named.rsplit(word).find(|part| !part.is_empty()).unwrap_or("").to_owned();
    let (kind, shown) = match (head.contains('('), body.contains('{')) {
        (true, true) => ("function", false),
        (true, false) => ("declaration", false),
        (false, _) if body.starts_with("typedef") => ("type", false),
        (false, _) => ("constant", body.len() < 60),
    };
    let body = if shown {
        body.split_once('=').map_or(body.clone(), |(_, v)| v.trim_end_matches(';').trim().to_owned())
    } else {
        body
    };
    out.push(Piece { kind, name, body, shown });
}

fn normal(text: &str) -> String {
    text.split_whitespace().collect::<Vec<_>>().join(" ")
}

/// C text with comments turned into blanks; line breaks stay.
fn without_comments(text: &str) -> String {
    let mut out = String::with_capacity(text.len());
    let mut letters = text.chars().peekable();
    let mut quote: Option<char> = None;
    while let Some(letter) = letters.next() {
        match (quote, letter) {
            (Some(_), '\\') => {
                out.push(letter);
                out.extend(letters.next());
            }
            (Some(mark), _) => {
                out.push(letter);
                if letter == mark {
                    quote = None;
                }
            }
            (None, '"' | '\'') => {
                quote = Some(letter);
                out.push(letter);
            }
            (None, '/') if letters.peek() == Some(&'*') => {
                letters.next();
                let mut last = ' ';
                for inner in letters.by_ref() {
                    if inner == '\n' {
                        out.push('\n');
                    }
                    if last == '*' && inner == '/' {
                        break;
                    }
                    last = inner;
                }
                out.push(' ');
            }
            (None, '/') if letters.peek() == Some(&'/') => while letters.next_if(|&c| c != '\n').is_some() {},
            (None, _) => out.push(letter),
        }
    }
    out
}

#[cfg(test)]
mod tests {
    use super::*;

    const RUST: &str = "/// A level.\npub mod onset {\n    /// Lower end.\n    pub const FROM: f64 = -60.0;\n    pub fn value(f: f64) -> f64 {\n        1.0 + f * 2.0\n    }\n}\npub mod line {\n    pub const FROM: f64 = -60.0;\n}\n";
    const C: &str = "/* FROM of it */\n#include <stddef.h>\n#define X_FROM (-60.0)\n#ifdef __cplusplus\nextern \"C\" {\n#endif\ntypedef enum { X_OK = 0, X_BELOW = 1 } x_status;\ndouble x_onset(double f);\n#ifdef __cplusplus\n}\n#endif\nstatic const double k = 2.0;\ndouble x_onset(double f)\n{\n    if (f > 0) { return k; } // here\n    return 1.0 + f * 2.0;\n}\n";

    fn edits(language: &str, text: &str, from: &str, to: &str) -> Vec<(usize, String)> {
        assert!(text.contains(from));
        differences(language, text, &text.replacen(from, to, 1))
            .into_iter()
            .map(|edit| (edit.line, edit.text))
            .collect()
    }

    #[test]
    fn an_edited_rust_file_names_the_constant_or_function() {
        assert_eq!(differences("rust", RUST, RUST), []);
        let one = |line, text: &str| vec![(line, text.to_owned())];
        assert_eq!(edits("rust", RUST, "-60.0", "-61.0"), one(4, "constant onset::FROM -60.0 to -61.0"));
        assert_eq!(edits("rust", RUST, "* 2.0", "* 2.5"), one(5, "function onset::value changed"));
        assert_eq!(edits("rust", RUST, "Lower", "Upper"), one(3, "comments or layout changed"));
        assert_eq!(
            edits("rust", RUST, "pub mod line", "pub const Z: f64 = 1.0;\npub mod line"),
            one(9, "constant Z is new")
        );
        assert!(edits("rust", RUST, "pub mod line {", "pub mod line {{")[0].1.contains("no longer be read"));
    }

    #[test]
    fn an_edited_c_file_names_the_macro_or_function() {
        let one = |line, text: &str| vec![(line, text.to_owned())];
        assert_eq!(differences("c", C, C), []);
        assert_eq!(edits("c", C, "(-60.0)", "(-61.0)"), one(3, "macro X_FROM -60.0 to -61.0"));
        assert_eq!(edits("c", C, "* 2.0;", "* 2.5;"), one(8, "function x_onset changed"));
        assert_eq!(edits("c", C, "= 2.0;", "= 2.5;"), one(12, "constant k 2.0 to 2.5"));
        assert_eq!(edits("c", C, "X_BELOW = 1", "X_BELOW = 2"), one(7, "type x_status changed"));
        assert_eq!(edits("c", C, "// here", "// there"), one(15, "comments or layout changed"));
        assert_eq!(edits("c", C, "double x_onset(double f);\n", ""), one(8, "declaration x_onset is gone"));
    }

    #[test]
    fn circuit_files_are_compared_by_line() {
        let edits = differences("spice", "* a\n.param c=1\n", "* a\n.param c=2\n");
        assert_eq!(edits[0], Edit { line: 2, text: "`.param c=1` to `.param c=2`".to_owned() });
    }

    #[test]
    fn unbalanced_and_odd_text_is_survived() {
        for text in ["}}}{{{", "/*", "\"", "'\\", "#define", "a(", "{;}", "é\\\"", "//"] {
            let _ = differences("c", C, text);
            let _ = differences("rust", RUST, text);
            let _ = differences("verilog-a", C, text);
        }
    }
}
