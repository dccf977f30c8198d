//! YAML text to a tree of nodes with the place of each, before any value is
//! read.
//!
//! In: bytes. Out: a [`Node`] with byte stretches. Whatever could make the text
//! grow when it is read (aliases, anchors, deep nesting, several documents) or
//! mean two things (duplicate keys, tags, merge keys) is refused here, so that
//! the reader of values only sees harmless text.

use std::collections::BTreeMap;
use std::ops::Range;

use saphyr_parser::{Event, Parser, ScalarStyle, Span};

use crate::diagnostic::{Diagnostic, Error, Place, Result};

/// Largest file of the language, in bytes.
pub const LARGEST: usize = 1 << 20;

/// Deepest nesting of lists and mappings.
pub const DEEPEST: usize = 64;

/// One value with its stretch of the file, in bytes.
#[derive(Clone, Debug)]
pub struct Node {
    pub span: Range<usize>,
    pub kind: NodeKind,
}

/// What a value is.
#[derive(Clone, Debug)]
pub enum NodeKind {
    /// Text; `plain` if it stands without quotes.
    Scalar {
        text: String,
        plain: bool,
    },
    List(Vec<Node>),
    /// Keys in the order of the file; `index` finds them by their text.
    Map {
        keys: Vec<Key>,
        index: BTreeMap<String, usize>,
    },
}

/// A key with its value.
#[derive(Clone, Debug)]
pub struct Key {
    pub text: String,
    pub span: Range<usize>,
    pub value: Node,
}

impl Node {
    /// The keys of a mapping; none of anything else.
    pub fn keys(&self) -> &[Key] {
        if let NodeKind::Map { keys, .. } = &self.kind { keys } else { &[] }
    }

    /// The value under a key.
    pub fn get(&self, key: &str) -> Option<&Node> {
        self.key(key).map(|one| &one.value)
    }

    fn key(&self, key: &str) -> Option<&Key> {
        let NodeKind::Map { keys, index } = &self.kind else { return None };
        keys.get(*index.get(key)?)
    }

    /// The items of a list; none of anything else.
    pub fn items(&self) -> &[Node] {
        if let NodeKind::List(items) = &self.kind { items } else { &[] }
    }

    /// The text of a scalar.
    pub fn text(&self) -> Option<&str> {
        if let NodeKind::Scalar { text, .. } = &self.kind { Some(text) } else { None }
    }

    /// The node at a path such as `systems.electron.stack[0].edge`.
    pub fn find(&self, path: &str) -> Option<&Node> {
        path.split(['.', '[']).filter(|step| !step.is_empty()).try_fold(self, |node, step| {
            match step.strip_suffix(']') {
                Some(index) => node.items().get(index.parse::<usize>().ok()?),
                None => node.get(step),
            }
        })
    }

    /// The stretch of a key at a path.
    pub fn find_key(&self, path: &str) -> Option<Range<usize>> {
        let (parent, last) = path.rsplit_once('.').unwrap_or(("", path));
        self.find(parent)?.key(last).map(|key| key.span.clone())
    }
}

/// Text that is checked to be harmless YAML, with its tree.
#[derive(Clone, Debug)]
pub struct Text {
    /// File name for messages.
    pub file: String,
    /// The text without a byte order mark.
    pub text: String,
    /// Bytes of the byte order mark.
    pub offset: usize,
    /// The tree; its stretches count from the start of the file.
    pub root: Node,
}

impl Text {
    /// The place of a stretch.
    pub fn place(&self, span: Range<usize>) -> Place {
        Place { file: self.file.clone(), start: span.start, end: span.end }
    }
}

/// Start of a text, for messages.
pub fn short(text: &str) -> String {
    let head: String = text.chars().take(60).map(|c| if c.is_control() { ' ' } else { c }).collect();
    if text.chars().nth(60).is_some() { format!("{head}...") } else { head }
}

/// UTF-8 text without control characters, at most `largest` bytes; with the
/// length of its byte order mark.
///
/// # Errors
/// At the first byte that is wrong.
pub fn decode(file: &str, bytes: &[u8], largest: usize) -> Result<(String, usize)> {
    let at = |start: usize, end: usize| Some(Place { file: file.to_owned(), start, end });
    if bytes.len() > largest {
        return Err(Error::spec(
            Diagnostic::new("too-large", "the file is too large")
                .at(at(0, 0))
                .found(format!("{} bytes", bytes.len()))
                .expected(format!("at most {largest}"))
                .action("split the work over several files"),
        ));
    }
    let text = std::str::from_utf8(bytes).map_err(|error| {
        let start = error.valid_up_to();
        let byte = bytes.get(start).copied().unwrap_or(0);
        Error::spec(
            Diagnostic::new("not-utf-8", "the file is not UTF-8 text")
                .at(at(start, start + 1))
                .found(format!("byte 0x{byte:02x}"))
                .action("save the file as UTF-8"),
        )
    })?;
    let offset = if text.starts_with('\u{feff}') { 3 } else { 0 };
    let text = text.get(offset..).unwrap_or("");
    let wrong = text
        .char_indices()
        .find(|(_, c)| (c.is_control() && !matches!(c, '\n' | '\r' | '\t')) || *c == '\u{feff}');
    if let Some((start, c)) = wrong {
        return Err(Error::spec(
            Diagnostic::new("control-character", "the file holds a control character")
                .at(at(offset + start, offset + start + c.len_utf8()))
                .found(format!("U+{:04X}", u32::from(c)))
                .action("remove it"),
        ));
    }
    Ok((text.to_owned(), offset))
}

/// A list or mapping that is still open.
struct Open {
    start: usize,
    keys: Option<Vec<Key>>,
    items: Vec<Node>,
    /// A key that waits for its value.
    key: Option<(String, Range<usize>)>,
    /// Number of each key.
    seen: BTreeMap<String, usize>,
}

/// Counts in bytes what the parser counts in characters.
struct Bytes {
    /// Byte of each character; empty for ASCII.
    table: Vec<usize>,
    length: usize,
    offset: usize,
}

impl Bytes {
    fn new(text: &str, offset: usize) -> Self {
        let table =
            if text.is_ascii() { Vec::new() } else { text.char_indices().map(|(byte, _)| byte).collect() };
        Self { table, length: text.len(), offset }
    }

    fn of(&self, character: usize) -> usize {
        let byte = if self.table.is_empty() {
            character.min(self.length)
        } else {
            self.table.get(character).copied().unwrap_or(self.length)
        };
        self.offset + byte
    }

    fn span(&self, span: &Span) -> Range<usize> {
        let start = self.of(span.start.index());
        start..self.of(span.end.index()).max(start)
    }
}

/// Reads bytes into a tree.
///
/// # Errors
/// What the language does not allow of a file; several duplicate keys at once.
pub fn read(file: &str, bytes: &[u8]) -> Result<Text> {
    let (text, offset) = decode(file, bytes, LARGEST)?;
    let root = Builder { file, count: Bytes::new(&text, offset), open: Vec::new(), found: Vec::new() }
        .build(&text)?;
    Ok(Text { file: file.to_owned(), text, offset, root })
}

struct Builder<'a> {
    file: &'a str,
    count: Bytes,
    open: Vec<Open>,
    found: Vec<Diagnostic>,
}

impl Builder<'_> {
    fn fault(&self, code: &'static str, span: Range<usize>, message: impl Into<String>) -> Diagnostic {
        let place = Place { file: self.file.to_owned(), start: span.start, end: span.end };
        Diagnostic::new(code, message).at(Some(place))
    }

    fn build(mut self, text: &str) -> Result<Node> {
        let mut root = None;
        let mut documents = 0;
        let mut parser = Parser::new_from_str(text);
        while let Some(next) = parser.next_event() {
            let (event, span) = next.map_err(|error| {
                let start = self.count.of(error.marker().index());
                Error::spec(
                    self.fault("yaml-syntax", start..start, format!("the file is not YAML: {}", error.info()))
                        .action(
                            "look at the quotes, brackets and spaces before this place; indent with spaces, not tabs",
                        ),
                )
            })?;
            let span = self.count.span(&span);
            let done = match event {
                Event::Nothing | Event::StreamStart | Event::StreamEnd | Event::DocumentEnd => None,
                Event::DocumentStart(_) => {
                    documents += 1;
                    if documents > 1 {
                        return Err(Error::spec(
                            self.fault("several-documents", span, "a second document begins here")
                                .expected("one document")
                                .action("keep each spec in a file of its own"),
                        ));
                    }
                    None
                }
                Event::Alias(_) => {
                    return Err(Error::spec(
                        self.fault("alias", span, "aliases are not part of the language")
                            .action("write the value out, or give it a name under `constants`"),
                    ));
                }
                Event::Scalar(value, style, anchor, tag) => {
                    self.plain(anchor, tag.is_some(), &span)?;
                    // A block scalar's stretch may take in the lines below it.
                    let written = text
                        .get(
                            span.start.saturating_sub(self.count.offset)
                                ..span.end.saturating_sub(self.count.offset),
                        )
                        .unwrap_or("");
                    let trimmed = written.trim_end().len().min(written.len());
                    let plain = style == ScalarStyle::Plain;
                    Some(Node {
                        span: span.start..span.start + trimmed,
                        kind: NodeKind::Scalar { text: value.into_owned(), plain },
                    })
                }
                Event::SequenceStart(anchor, tag) => {
                    self.plain(anchor, tag.is_some(), &span)?;
                    self.push(span, None)?;
                    None
                }
                Event::MappingStart(anchor, tag) => {
                    self.plain(anchor, tag.is_some(), &span)?;
                    self.push(span, Some(Vec::new()))?;
                    None
                }
                Event::SequenceEnd | Event::MappingEnd => self.open.pop().map(|open| {
                    let end = match (open.keys.as_ref(), open.items.last()) {
                        // Block collections end where their last value ends.
                        (Some(keys), _) if span.end <= span.start => {
                            keys.last().map(|key| key.value.span.end)
                        }
                        (None, Some(item)) if span.end <= span.start => Some(item.span.end),
                        _ => None,
                    };
                    let kind = match open.keys {
                        Some(keys) => NodeKind::Map { keys, index: open.seen },
                        None => NodeKind::List(open.items),
                    };
                    Node { span: open.start..end.unwrap_or(span.end).max(open.start), kind }
                }),
            };
            if let Some(node) = done {
                root = self.place(node)?.or(root);
            }
        }
        if !self.found.is_empty() {
            return Err(Error::Spec(self.found));
        }
        root.ok_or_else(|| {
            Error::spec(
                self.fault("empty", self.count.offset..self.count.offset, "the file holds no value")
                    .action("`shiftwright new layers FILE` writes a spec to begin with"),
            )
        })
    }

    fn plain(&self, anchor: usize, tagged: bool, span: &Range<usize>) -> Result<()> {
        let (code, what) = match (anchor, tagged) {
            (0, false) => return Ok(()),
            (0, true) => ("tag", "tags are not part of the language"),
            _ => ("anchor", "anchors are not part of the language"),
        };
        Err(Error::spec(
            self.fault(code, span.clone(), what).action("write the plain value; numbers may be quoted"),
        ))
    }

    fn push(&mut self, span: Range<usize>, keys: Option<Vec<Key>>) -> Result<()> {
        if self.open.len() >= DEEPEST {
            return Err(Error::spec(
                self.fault("too-deep", span, "the file is nested too deeply")
                    .expected(format!("at most {DEEPEST} levels")),
            ));
        }
        self.open.push(Open { start: span.start, keys, items: Vec::new(), key: None, seen: BTreeMap::new() });
        Ok(())
    }

    /// Puts a finished value where it belongs; gives it back if it is the root.
    fn place(&mut self, node: Node) -> Result<Option<Node>> {
        let Some(mut open) = self.open.pop() else { return Ok(Some(node)) };
        match (&mut open.keys, open.key.take()) {
            (None, _) => open.items.push(node),
            (Some(keys), Some((text, span))) => keys.push(Key { text, span, value: node }),
            (Some(keys), None) => {
                let NodeKind::Scalar { text, .. } = node.kind else {
                    return Err(Error::spec(
                        self.fault("key", node.span, "a list or mapping cannot be a key").expected("a word"),
                    ));
                };
                if text == "<<" {
                    return Err(Error::spec(
                        self.fault("merge-key", node.span, "merge keys are not part of the language")
                            .action("write the keys out"),
                    ));
                }
                if open.seen.contains_key(&text) {
                    if self.found.len() < 20 {
                        let fault = self
                            .fault(
                                "duplicate-key",
                                node.span.clone(),
                                format!("`{}` stands here twice", short(&text)),
                            )
                            .action("keep one of the two");
                        self.found.push(fault);
                    }
                } else {
                    open.seen.insert(text.clone(), keys.len());
                }
                open.key = Some((text, node.span));
            }
        }
        self.open.push(open);
        Ok(None)
    }
}
