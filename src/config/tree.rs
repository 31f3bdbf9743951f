//! From text to a tree in which every key and value knows its place. Nothing is guessed: scalars stay text.

use std::path::Path;

use saphyr_parser::{Event, Parser, ScalarStyle, Span};

use super::messages::{Fault, Mistake};
use super::place::{lines, Place, Sources};

/// Deepest nesting of blocks and brackets.
const DEEPEST: usize = 32;
/// Longest config, bytes.
const LONGEST: u64 = 64 << 20;

/// A value of the tree.
#[derive(Debug, Clone)]
pub struct Node {
    /// Where it stands.
    pub place: Place,
    /// What it is.
    pub kind: Kind,
}

/// What a value of the tree can be.
#[derive(Debug, Clone)]
pub enum Kind {
    /// A scalar as written, without quotes; `exact` where a character of the text is a character of the line.
    Scalar {
        /// The text.
        text: String,
        /// Stood in quotes.
        quoted: bool,
        /// Characters of the text and of the source line run in step.
        exact: bool,
    },
    /// A list.
    List(Vec<Node>),
    /// A block of keys and values, in order.
    Map(Vec<Entry>),
}

/// A key and its value.
#[derive(Debug, Clone)]
pub struct Entry {
    /// The key as written.
    pub key: String,
    /// Where the key stands.
    pub place: Place,
    /// Its value.
    pub value: Node,
}

impl Node {
    /// The text of a scalar.
    pub fn text(&self) -> Option<&str> {
        match &self.kind {
            Kind::Scalar { text, .. } => Some(text),
            _ => None,
        }
    }

    /// The items of a list.
    pub fn items(&self) -> Option<&[Node]> {
        match &self.kind {
            Kind::List(items) => Some(items),
            _ => None,
        }
    }

    /// The entries of a block.
    pub fn entries(&self) -> Option<&[Entry]> {
        match &self.kind {
            Kind::Map(entries) => Some(entries),
            _ => None,
        }
    }

    /// Nothing stands after the colon.
    pub fn is_empty(&self) -> bool {
        matches!(&self.kind, Kind::Scalar { text, quoted: false, .. } if text.is_empty())
    }

    /// The value of a key.
    pub fn get(&self, key: &str) -> Option<&Node> {
        self.entries()?.iter().find(|entry| entry.key == key).map(|entry| &entry.value)
    }
}

/// Reads a text file into `sources`; what cannot be text is refused with its place.
pub fn read_text(path: &Path, sources: &mut Sources) -> Result<u16, Mistake> {
    let shown = path.display().to_string();
    // the file has a number even if it cannot be read, so that a message can name it
    let refuse = |sources: &mut Sources, bytes: Vec<u8>, text: String, place: Place, fault| {
        let file = sources.add(path, bytes, text);
        Err(Mistake::error(Place { file, ..place }, fault))
    };
    let nowhere = Place::default();
    let bytes = match std::fs::metadata(path) {
        Ok(data) if data.is_dir() => return refuse(sources, Vec::new(), String::new(), nowhere, Fault::IsFolder { path: shown }),
        Ok(data) if data.len() > LONGEST => {
            return refuse(sources, Vec::new(), String::new(), nowhere, Fault::TooLong { path: shown, bytes: data.len(), limit: LONGEST })
        }
        _ => match std::fs::read(path) {
            Ok(bytes) => bytes,
            Err(reason) => {
                let reason =
                    if reason.kind() == std::io::ErrorKind::NotFound { "no such file exists".to_string() } else { reason.to_string() };
                return refuse(sources, Vec::new(), String::new(), nowhere, Fault::CannotRead { path: shown, reason });
            }
        },
    };
    match text_of(&bytes) {
        Ok(text) => Ok(sources.add(path, bytes, text)),
        Err((place, fault)) => {
            let text = String::from_utf8_lossy(&bytes).into_owned();
            refuse(sources, bytes, text, place, fault)
        }
    }
}

/// The text of a file, without byte order mark; bytes that are no text are refused with their place.
fn text_of(bytes: &[u8]) -> Result<String, (Place, Fault)> {
    let bytes = bytes.strip_prefix(b"\xef\xbb\xbf").unwrap_or(bytes);
    let at = |before: &str| {
        let line = lines(before).count().max(1);
        let column = lines(before).last().map_or(0, |last| last.chars().count()) + 1;
        Place { file: 0, line: line as u32, column: column as u32, length: 1 }
    };
    let text = std::str::from_utf8(bytes).map_err(|bad| {
        let good = std::str::from_utf8(&bytes[..bad.valid_up_to()]).unwrap_or_default();
        (at(good), Fault::NotUtf8 { byte: bytes[bad.valid_up_to()] })
    })?;
    match text.char_indices().find(|(_, c)| (c.is_control() && !matches!(c, '\n' | '\r' | '\t' | '\u{85}')) || *c == '\u{feff}') {
        Some((index, c)) => Err((at(&text[..index]), Fault::Control { code: c as u32 })),
        None => Ok(text.to_string()),
    }
}

/// The tree of a YAML text already in `sources`. Mistakes that leave a tree are added to `mistakes`; others end in `Err`.
pub fn parse(sources: &Sources, file: u16, mistakes: &mut Vec<Mistake>) -> Result<Node, Mistake> {
    let text = &sources.files()[usize::from(file)].text;
    if let Some(place) = first_tab(text, file) {
        return Err(Mistake::error(place, Fault::Tab));
    }
    Builder { sources, file, parser: Parser::new_from_str(text), lines: lines(text).collect(), reached: (0, 0, 0), mistakes }.document()
}

/// The first tab that is neither in a comment nor in quotes.
fn first_tab(text: &str, file: u16) -> Option<Place> {
    for (number, line) in lines(text).enumerate() {
        let mut quote = None;
        let mut before = ' ';
        for (column, c) in line.chars().enumerate() {
            match (quote, c) {
                (None, '#') if before.is_whitespace() => break,
                (None, '\t') => return Some(Place { file, line: number as u32 + 1, column: column as u32 + 1, length: 1 }),
                (None, '"' | '\'') if matches!(before, ' ' | '[' | '{' | ',' | '(') => quote = Some(c),
                (Some(open), c) if c == open => quote = None,
                _ => {}
            }
            before = c;
        }
    }
    None
}

struct Builder<'a> {
    sources: &'a Sources,
    file: u16,
    parser: Parser<'a, saphyr_parser::StrInput<'a>>,
    lines: Vec<&'a str>,
    /// Line, characters and bytes up to the last value: a line of many values is walked once.
    reached: (u32, usize, usize),
    mistakes: &'a mut Vec<Mistake>,
}

impl<'a> Builder<'a> {
    /// The characters at a place, as they stand in the file.
    fn written(&mut self, place: Place) -> &'a str {
        let line = (place.line as usize).checked_sub(1).and_then(|k| self.lines.get(k).copied()).unwrap_or_default();
        let wanted = place.column as usize - 1;
        let (chars, bytes) = match self.reached {
            (line, chars, bytes) if line == place.line && chars <= wanted => (chars, bytes),
            _ => (0, 0),
        };
        let after = |text: &str, count: usize| text.char_indices().nth(count).map_or(text.len(), |(at, _)| at);
        let start = bytes + after(&line[bytes..], wanted - chars);
        self.reached = (place.line, wanted, start);
        &line[start..start + after(&line[start..], place.length as usize)]
    }

    fn place(&self, span: Span) -> Place {
        let one_line = span.start.line() == span.end.line();
        let length = if one_line { span.end.col().saturating_sub(span.start.col()).max(1) } else { 1 };
        Place { file: self.file, line: span.start.line() as u32, column: span.start.col() as u32 + 1, length: length as u32 }
    }

    fn next(&mut self) -> Result<(Event<'static>, Span), Mistake> {
        match self.parser.next() {
            Some(Ok((event, span))) => Ok((owned(event), span)),
            Some(Err(error)) => {
                let mark = error.marker();
                let place = Place { file: self.file, line: mark.line() as u32, column: mark.col() as u32 + 1, length: 1 };
                Err(Mistake::error(place, self.translate(error.info(), place)))
            }
            None => Ok((Event::StreamEnd, Span::default())),
        }
    }

    /// What the parser's words mean for somebody who did not write a parser.
    fn translate(&self, info: &str, place: Place) -> Fault {
        let lower = info.to_lowercase();
        let line = self.sources.line(place.file, place.line).unwrap_or_default();
        if lower.contains("anchor") || lower.contains("alias") {
            return Fault::Alias { text: word_at(line, place.column) };
        }
        let reason = if lower.contains("quote") {
            "a quoted text is not closed (or its next line is indented less)".to_string()
        } else if lower.contains("recursion") || lower.contains("depth") {
            return Fault::TooDeep { limit: DEEPEST };
        } else if lower.contains("mapping values") || lower.contains("simple key") || lower.contains("implicit key") {
            "a colon stands where no key can be, or the colon after a key is missing".to_string()
        } else if lower.contains("indent") {
            "the indentation does not fit the lines above".to_string()
        } else if lower.contains("flow") || lower.contains("','") || lower.contains("']'") || lower.contains("'}'") {
            "a bracket or brace is not closed, or a comma is missing".to_string()
        } else {
            info.trim_end_matches('.').to_string()
        };
        Fault::NotYaml { reason }
    }

    fn document(mut self) -> Result<Node, Mistake> {
        let mut root = None;
        loop {
            let (event, span) = self.next()?;
            match event {
                Event::StreamStart | Event::DocumentEnd | Event::Nothing => {}
                Event::StreamEnd => break,
                Event::DocumentStart(_) if root.is_some() => return Err(Mistake::error(self.place(span), Fault::SecondDocument)),
                Event::DocumentStart(_) => {}
                event => root = Some(self.node(event, span, 0)?),
            }
        }
        match root {
            Some(node) if !node.is_empty() => Ok(node),
            _ => Err(Mistake::error(Place::whole_file(self.file), Fault::Empty)),
        }
    }

    fn refuse_tricks(&self, anchor: usize, tagged: bool, span: Span) -> Result<(), Mistake> {
        if anchor == 0 && !tagged {
            return Ok(());
        }
        let place = self.place(span);
        // the event's place is that of the value; the anchor or tag stands before it on the line
        let line = self.sources.line(self.file, place.line).unwrap_or_default();
        let before: String = line.chars().take(place.column as usize - 1 + place.length as usize).collect();
        if tagged {
            let (column, text) = last_word(&before, '!').unwrap_or((place.column as usize, "!".to_string()));
            return Err(Mistake::error(Place { column: column as u32, length: text.chars().count() as u32, ..place }, Fault::Tag { text }));
        }
        if anchor > 0 {
            let (column, text) = last_word(&before, '&').unwrap_or((place.column as usize, "&".to_string()));
            return Err(Mistake::error(
                Place { column: column as u32, length: text.chars().count() as u32, ..place },
                Fault::Anchor { text },
            ));
        }
        Ok(())
    }

    fn node(&mut self, event: Event<'static>, span: Span, depth: usize) -> Result<Node, Mistake> {
        let place = self.place(span);
        if depth > DEEPEST {
            return Err(Mistake::error(place, Fault::TooDeep { limit: DEEPEST }));
        }
        match event {
            Event::Scalar(text, style, anchor, tag) => {
                self.refuse_tricks(anchor, tag.is_some(), span)?;
                let quoted = style != ScalarStyle::Plain;
                let inside = self.written(place);
                let exact = if quoted { inside.get(1..inside.len().saturating_sub(1)) == Some(&*text) } else { *inside == *text };
                Ok(Node { place, kind: Kind::Scalar { text: text.into_owned(), quoted, exact } })
            }
            Event::Alias(_) => {
                let line = self.sources.line(self.file, place.line).unwrap_or_default();
                Err(Mistake::error(place, Fault::Alias { text: word_at(line, place.column) }))
            }
            Event::SequenceStart(anchor, tag) => {
                self.refuse_tricks(anchor, tag.is_some(), span)?;
                let mut items = Vec::new();
                loop {
                    let (event, end) = self.next()?;
                    if event == Event::SequenceEnd {
                        return Ok(Node { place: self.spanning(span, end), kind: Kind::List(items) });
                    }
                    items.push(self.node(event, end, depth + 1)?);
                }
            }
            Event::MappingStart(anchor, tag) => {
                self.refuse_tricks(anchor, tag.is_some(), span)?;
                let mut entries: Vec<Entry> = Vec::new();
                let mut first_lines = std::collections::HashMap::new();
                loop {
                    let (event, at) = self.next()?;
                    if event == Event::MappingEnd {
                        return Ok(Node { place: self.spanning(span, at), kind: Kind::Map(entries) });
                    }
                    let key_node = self.node(event, at, depth + 1)?;
                    let (event, at) = self.next()?;
                    let value = self.node(event, at, depth + 1)?;
                    let Kind::Scalar { text: key, .. } = key_node.kind else {
                        return Err(Mistake::error(key_node.place, Fault::KeyNotText));
                    };
                    let place = key_node.place;
                    match first_lines.get(&key) {
                        Some(first) => self.mistakes.push(Mistake::error(place, Fault::DuplicateKey { key, first: *first })),
                        None => {
                            first_lines.insert(key.clone(), place.line);
                            entries.push(Entry { key, place, value });
                        }
                    }
                }
            }
            other => Err(Mistake::error(place, Fault::NotYaml { reason: format!("{other:?} is out of place") })),
        }
    }

    /// From the start of a collection to its end, if both are on one line.
    fn spanning(&self, start: Span, end: Span) -> Place {
        let place = self.place(start);
        if start.start.line() == end.end.line() {
            Place { length: end.end.col().saturating_sub(start.start.col()).max(1) as u32, ..place }
        } else {
            place
        }
    }
}

fn owned(event: Event<'_>) -> Event<'static> {
    use std::borrow::Cow;
    match event {
        Event::Scalar(text, style, anchor, tag) => {
            Event::Scalar(Cow::Owned(text.into_owned()), style, anchor, tag.map(|tag| Cow::Owned(tag.into_owned())))
        }
        Event::SequenceStart(anchor, tag) => Event::SequenceStart(anchor, tag.map(|tag| Cow::Owned(tag.into_owned()))),
        Event::MappingStart(anchor, tag) => Event::MappingStart(anchor, tag.map(|tag| Cow::Owned(tag.into_owned()))),
        Event::Nothing => Event::Nothing,
        Event::StreamStart => Event::StreamStart,
        Event::StreamEnd => Event::StreamEnd,
        Event::DocumentStart(explicit) => Event::DocumentStart(explicit),
        Event::DocumentEnd => Event::DocumentEnd,
        Event::Alias(id) => Event::Alias(id),
        Event::SequenceEnd => Event::SequenceEnd,
        Event::MappingEnd => Event::MappingEnd,
    }
}

/// The word that starts at a column (from 1).
fn word_at(line: &str, column: u32) -> String {
    line.chars().skip(column.max(1) as usize - 1).take_while(|c| !c.is_whitespace() && !matches!(c, ',' | ']' | '}')).collect()
}

/// The last word beginning with `sign`, and its column from 1.
fn last_word(text: &str, sign: char) -> Option<(usize, String)> {
    let words: Vec<(usize, char)> = text.chars().enumerate().collect();
    let starts: Vec<usize> = words
        .iter()
        .filter(|(at, c)| *c == sign && (*at == 0 || matches!(words[at - 1].1, ' ' | ':' | '[' | '{' | ',')))
        .map(|(at, _)| *at)
        .collect();
    let start = *starts.last()?;
    Some((start + 1, words[start..].iter().map(|(_, c)| *c).take_while(|c| !c.is_whitespace()).collect()))
}
