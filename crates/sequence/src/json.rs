//! JSON text as a tree in which every value and every key knows its place.
//!
//! A general JSON library loses the positions, stops at the first mistake and lets the last of
//! two equal keys win. On a bench all three cost: a finding without a place is a hunt, one
//! mistake at a time is an evening, and the second `above` of an interlock may be the typing
//! error. So the tree is read by a small parser of RFC 8259 ([`parse`](self::parse())) that keeps
//! byte spans and goes on after what it can mend.
//!
//! Invariants:
//! - Spans lie inside the text, children inside their parent, in the order of the text.
//! - An object has each key once (a repeated one is a finding, the first stays).
//! - Depth and size are bounded, so no input can exhaust the stack.
//!
//! What it deliberately does not do: no numbers as floats (a number is kept as its text), no
//! comments, no trailing commas, no NaN.

mod parse;

pub(crate) use parse::{Problem, parse};

/// A range of bytes in the text.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) struct Extent {
    pub(crate) start: usize,
    pub(crate) end: usize,
}

impl Extent {
    fn contains(self, offset: usize) -> bool {
        (self.start..self.end).contains(&offset)
    }
}

/// A value with its place.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(crate) struct Node {
    pub(crate) value: Value,
    pub(crate) extent: Extent,
}

/// A JSON value; numbers stay text.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(crate) enum Value {
    Null,
    Bool(bool),
    Number(String),
    Text(String),
    List(Vec<Node>),
    Object(Vec<Member>),
    /// Something the parser has already complained about.
    Damaged,
}

/// A key and its value.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(crate) struct Member {
    pub(crate) key: String,
    pub(crate) key_extent: Extent,
    pub(crate) node: Node,
}

impl Node {
    /// The value under a key, if this is an object that has it.
    pub(crate) fn get(&self, key: &str) -> Option<&Node> {
        self.members()
            .iter()
            .find(|member| member.key == key)
            .map(|member| &member.node)
    }

    /// The members, if this is an object; else none.
    pub(crate) fn members(&self) -> &[Member] {
        if let Value::Object(members) = &self.value {
            members
        } else {
            &[]
        }
    }

    /// The elements, if this is a list; else none.
    pub(crate) fn elements(&self) -> &[Node] {
        if let Value::List(elements) = &self.value {
            elements
        } else {
            &[]
        }
    }

    /// The text, if this is one.
    pub(crate) fn text(&self) -> Option<&str> {
        if let Value::Text(text) = &self.value {
            Some(text)
        } else {
            None
        }
    }

    /// The node at a JSON pointer and, if it is a member of an object, its key's place.
    pub(crate) fn member_at(&self, pointer: &str) -> Option<(&Node, Option<Extent>)> {
        let mut here = (self, None);
        for token in pointer.split('/').skip(1) {
            here = match &here.0.value {
                Value::Object(members) => {
                    let key = token.replace("~1", "/").replace("~0", "~");
                    let member = members.iter().find(|member| member.key == key)?;
                    (&member.node, Some(member.key_extent))
                }
                Value::List(elements) => (elements.get(token.parse::<usize>().ok()?)?, None),
                Value::Null
                | Value::Bool(_)
                | Value::Number(_)
                | Value::Text(_)
                | Value::Damaged => return None,
            };
        }
        Some(here)
    }

    /// The JSON pointer of what stands at a byte offset.
    pub(crate) fn pointer_at(&self, offset: usize) -> String {
        let mut pointer = String::new();
        let mut here = self;
        loop {
            here = match &here.value {
                Value::Object(members) => {
                    let found = members.iter().find(|member| {
                        (member.key_extent.start..member.node.extent.end).contains(&offset)
                    });
                    let Some(member) = found else { return pointer };
                    pointer = child(&pointer, &member.key);
                    &member.node
                }
                Value::List(elements) => {
                    let found = elements
                        .iter()
                        .enumerate()
                        .find(|(_, element)| element.extent.contains(offset));
                    let Some((index, element)) = found else {
                        return pointer;
                    };
                    pointer = child(&pointer, &index.to_string());
                    element
                }
                Value::Null
                | Value::Bool(_)
                | Value::Number(_)
                | Value::Text(_)
                | Value::Damaged => return pointer,
            };
        }
    }
}

/// The pointer of a child: `~` and `/` in a key are escaped as RFC 6901 wants it.
pub(crate) fn child(pointer: &str, key: &str) -> String {
    format!("{pointer}/{}", key.replace('~', "~0").replace('/', "~1"))
}

/// Where lines begin, to turn offsets into lines and columns.
#[derive(Debug)]
pub(crate) struct Source<'a> {
    text: &'a str,
    line_starts: Vec<usize>,
}

/// A place as a person reads it.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(crate) struct Spot {
    /// Line, from 1.
    pub(crate) line: u32,
    /// Column in characters, from 1.
    pub(crate) column: u32,
    /// The text of the line, cut around the place if it is long.
    pub(crate) excerpt: String,
    /// Characters of `excerpt` before the place.
    pub(crate) caret: u32,
    /// Characters the place is wide, within the excerpt.
    pub(crate) width: u32,
}

/// Longest excerpt of a line, in characters.
const EXCERPT_CHARS: usize = 96;

fn count(number: usize) -> u32 {
    u32::try_from(number).unwrap_or(u32::MAX)
}

impl<'a> Source<'a> {
    pub(crate) fn new(text: &'a str) -> Self {
        let line_starts = std::iter::once(0)
            .chain(text.match_indices('\n').map(|(at, _)| at + 1))
            .collect();
        Self { text, line_starts }
    }

    pub(crate) fn text(&self) -> &'a str {
        self.text
    }

    /// Where an extent begins, with the line it stands in.
    pub(crate) fn locate(&self, extent: Extent) -> Spot {
        let line = self
            .line_starts
            .partition_point(|&start| start <= extent.start)
            .saturating_sub(1);
        let start = self.line_starts.get(line).copied().unwrap_or(0);
        let rest = self.text.get(start..).unwrap_or("");
        let whole = rest.split(['\n', '\r']).next().unwrap_or("");
        let before = self
            .text
            .get(start..extent.start)
            .unwrap_or("")
            .chars()
            .count();
        let width = self
            .text
            .get(extent.start..extent.end)
            .unwrap_or("")
            .chars()
            .take_while(|&c| c != '\n' && c != '\r')
            .count()
            .max(1);
        // A profile on one line may be a megabyte: show what stands around the place.
        let from = if before < EXCERPT_CHARS * 2 / 3 {
            0
        } else {
            before - EXCERPT_CHARS / 3
        };
        let excerpt: String = whole
            .chars()
            .skip(from)
            .take(EXCERPT_CHARS)
            .map(|c| if c == '\t' { ' ' } else { c })
            .collect();
        let shown = excerpt.trim_end().chars().count();
        let caret = before - from;
        Spot {
            line: count(line + 1),
            column: count(before + 1),
            caret: count(caret),
            width: count(width.min(shown.saturating_sub(caret).max(1))),
            excerpt: excerpt.trim_end().to_owned(),
        }
    }
}

#[cfg(test)]
#[expect(
    clippy::needless_raw_string_hashes,
    reason = "expect-test writes its texts with hashes"
)]
mod tests;
