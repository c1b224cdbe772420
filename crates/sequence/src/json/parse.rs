//! The parser of RFC 8259: complains, mends what has one obvious meaning, and goes on.
//!
//! What it mends is never used: a text with any problem is refused. It only lets the rest of the
//! text be judged in the same answer.

use super::{Extent, Member, Node, Value};
use crate::rule::Rule;

/// Deepest nesting; a repeat inside a repeat takes four levels.
const DEPTH_MAX: usize = 64;

/// Most keys of one object; no object of the format has a fiftieth of that.
const MEMBERS_MAX: usize = 1_000;
/// After so many problems the text is something else than a sequence.
const PROBLEMS_MAX: usize = 100;

/// Something that RFC 8259 forbids.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(crate) struct Problem {
    pub(crate) rule: Rule,
    pub(crate) extent: Extent,
    pub(crate) message: String,
    pub(crate) hint: String,
}

/// Reads a text. The tree is `None` when a problem left no way to go on.
pub(crate) fn parse(text: &str) -> (Option<Node>, Vec<Problem>) {
    let mut parser = Parser {
        text,
        at: if text.starts_with('\u{feff}') { 3 } else { 0 },
        problems: Vec::new(),
    };
    let root = parser.document();
    (root.ok(), parser.problems)
}

/// A problem that leaves no way to go on; it is already in the list.
struct Stuck;

struct Parser<'a> {
    text: &'a str,
    at: usize,
    problems: Vec<Problem>,
}

impl Parser<'_> {
    fn document(&mut self) -> Result<Node, Stuck> {
        let root = self.value(0)?;
        self.skip_space();
        if self.at < self.text.len() {
            self.problem(
                self.at,
                self.text.len(),
                "text follows after the end of the sequence",
                "write one object and nothing after its closing brace",
            );
        }
        Ok(root)
    }

    fn problem(&mut self, start: usize, end: usize, message: &str, hint: &str) {
        self.problems.push(Problem {
            rule: Rule::JsonSyntax,
            extent: Extent { start, end },
            message: message.to_owned(),
            hint: hint.to_owned(),
        });
    }

    fn peek(&self) -> Option<char> {
        self.text.get(self.at..)?.chars().next()
    }

    fn rest(&self) -> &str {
        self.text.get(self.at..).unwrap_or("")
    }

    fn take(&mut self, wanted: char) -> bool {
        let found = self.peek() == Some(wanted);
        if found {
            self.at += wanted.len_utf8();
        }
        found
    }

    /// Skips white space and complains about comments, which it skips too.
    fn skip_space(&mut self) {
        loop {
            let rest = self.rest();
            let space = rest.len() - rest.trim_start_matches([' ', '\t', '\n', '\r']).len();
            self.at += space;
            let rest = self.rest();
            let length = if rest.starts_with("//") || rest.starts_with('#') {
                rest.find('\n').unwrap_or(rest.len())
            } else if rest.starts_with("/*") {
                rest.find("*/").map_or(rest.len(), |end| end + 2)
            } else {
                return;
            };
            self.problem(
                self.at,
                self.at + length,
                "a comment, which JSON does not have",
                "put the words into a `note`, which every step may have",
            );
            self.at += length;
        }
    }

    /// What stands at the place, for a message.
    fn found(&self) -> String {
        match self.peek() {
            None => "the end of the text".to_owned(),
            Some(character) => format!("`{}`", character.escape_debug()),
        }
    }

    fn stuck<T>(&mut self, wanted: &str, hint: &str) -> Result<T, Stuck> {
        let message = format!("{} where {wanted} is wanted", self.found());
        let end = self.at + self.peek().map_or(0, char::len_utf8);
        self.problem(self.at, end, &message, hint);
        Err(Stuck)
    }

    fn value(&mut self, depth: usize) -> Result<Node, Stuck> {
        self.skip_space();
        let start = self.at;
        if self.problems.len() >= PROBLEMS_MAX {
            self.problem(
                start,
                start,
                "too many mistakes to go on",
                "mend those before this place first",
            );
            return Err(Stuck);
        }
        if depth > DEPTH_MAX {
            let message = format!("nested deeper than {DEPTH_MAX} levels");
            self.problem(start, start + 1, &message, "nest fewer repeats");
            return Err(Stuck);
        }
        let value = match self.peek() {
            Some('{') => self.object(depth)?,
            Some('[') => self.list(depth)?,
            Some('"') => self.string()?.map_or(Value::Damaged, Value::Text),
            Some('\'') => Value::Text(self.single_quoted()?),
            Some(c) if c.is_ascii_digit() || matches!(c, '-' | '+' | '.') => self.number(),
            Some(c) if c.is_alphabetic() => self.word(),
            Some(_) | None => return self.stuck("a value", "write a text in double quotes"),
        };
        Ok(Node {
            value,
            extent: Extent {
                start,
                end: self.at,
            },
        })
    }

    fn object(&mut self, depth: usize) -> Result<Value, Stuck> {
        let mut members: Vec<Member> = Vec::new();
        self.at += 1;
        self.skip_space();
        if self.take('}') {
            return Ok(Value::Object(members));
        }
        loop {
            let member = self.member(depth)?;
            if members.len() == MEMBERS_MAX {
                let Extent { start, end } = member.key_extent;
                let message = format!("more than {MEMBERS_MAX} keys in one object");
                self.problem(start, end, &message, "check the brackets up to here");
                return Err(Stuck);
            }
            if members.iter().any(|other| other.key == member.key) {
                self.problems.push(Problem {
                    rule: Rule::JsonDuplicateKey,
                    extent: member.key_extent,
                    message: format!("the key `{}` stands twice in one object", member.key),
                    hint: "keep one of the two".to_owned(),
                });
            } else {
                members.push(member);
            }
            if self.ends('}', "a comma or `}`")? {
                return Ok(Value::Object(members));
            }
        }
    }

    fn list(&mut self, depth: usize) -> Result<Value, Stuck> {
        let mut elements = Vec::new();
        self.at += 1;
        self.skip_space();
        if self.take(']') {
            return Ok(Value::List(elements));
        }
        loop {
            elements.push(self.value(depth + 1)?);
            if self.ends(']', "a comma or `]`")? {
                return Ok(Value::List(elements));
            }
        }
    }

    /// After an element: whether the container ends here.
    fn ends(&mut self, close: char, wanted: &str) -> Result<bool, Stuck> {
        self.skip_space();
        if self.take(close) {
            return Ok(true);
        }
        let comma = self.at;
        if !self.take(',') {
            let opens = self.peek().is_some_and(|c| matches!(c, '"' | '{' | '['));
            if opens {
                self.problem(
                    comma,
                    comma + 1,
                    &format!("{} where {wanted} is wanted", self.found()),
                    "put a comma before it",
                );
                return Ok(false);
            }
            return self.stuck(wanted, "check the brackets and commas up to here");
        }
        self.skip_space();
        if self.take(close) {
            self.problem(
                comma,
                comma + 1,
                &format!("a comma with nothing between it and `{close}`"),
                "leave the comma out",
            );
            return Ok(true);
        }
        Ok(false)
    }

    fn member(&mut self, depth: usize) -> Result<Member, Stuck> {
        self.skip_space();
        let start = self.at;
        let key = match self.peek() {
            Some('"') => self.string()?.unwrap_or_default(),
            Some('\'') => self.single_quoted()?,
            Some(c) if c.is_alphabetic() || c == '_' => {
                let word = self.bare_word();
                self.problem(
                    start,
                    self.at,
                    &format!("the key `{word}` stands without quotes"),
                    &format!("write \"{word}\""),
                );
                word
            }
            Some(_) | None => return self.stuck("a key", "write a key in double quotes"),
        };
        let key_extent = Extent {
            start,
            end: self.at,
        };
        self.skip_space();
        if !self.take(':') {
            return self.stuck("a colon", "put a colon between the key and its value");
        }
        let node = self.value(depth + 1)?;
        Ok(Member {
            key,
            key_extent,
            node,
        })
    }

    fn bare_word(&mut self) -> String {
        let word: String = self
            .rest()
            .chars()
            .take_while(|&c| c.is_alphanumeric() || c == '_' || c == '-')
            .collect();
        self.at += word.len();
        word
    }

    fn word(&mut self) -> Value {
        let start = self.at;
        let word = self.bare_word();
        match word.as_str() {
            "true" => Value::Bool(true),
            "false" => Value::Bool(false),
            "null" => Value::Null,
            _ => {
                self.problem(
                    start,
                    self.at,
                    &format!("`{word}` is no JSON value"),
                    "write a text in double quotes, a number, true or false",
                );
                Value::Damaged
            }
        }
    }

    fn number(&mut self) -> Value {
        let start = self.at;
        let length = self
            .rest()
            .find(|c: char| !(c.is_ascii_alphanumeric() || matches!(c, '+' | '-' | '.')))
            .unwrap_or(self.rest().len());
        self.at += length;
        let text = self.text.get(start..self.at).unwrap_or("").to_owned();
        if is_number(&text) {
            return Value::Number(text);
        }
        let message = format!("`{text}` is no JSON number");
        let hint = "write a quantity as a text in double quotes, with its unit; a count as digits";
        self.problem(start, self.at, &message, hint);
        Value::Damaged
    }

    fn single_quoted(&mut self) -> Result<String, Stuck> {
        let start = self.at;
        let inside = self.text.get(start + 1..).unwrap_or("");
        let Some(length) = inside.find(['\'', '\n']) else {
            return self.stuck("a value", "write a text in double quotes");
        };
        let text = inside.get(..length).unwrap_or("").to_owned();
        self.at = start + 1 + length;
        self.take('\'');
        self.problem(
            start,
            self.at,
            "a text in single quotes",
            "write it in double quotes",
        );
        Ok(text)
    }

    /// A string; `None` when its inside is damaged but its end was found.
    fn string(&mut self) -> Result<Option<String>, Stuck> {
        let start = self.at;
        self.at += 1;
        let mut text = String::new();
        let mut whole = true;
        loop {
            let here = self.at;
            let Some(character) = self.peek() else {
                self.problem(
                    start,
                    start + 1,
                    "a text that does not end",
                    "close it with a double quote",
                );
                return Err(Stuck);
            };
            self.at += character.len_utf8();
            match character {
                '"' => return Ok(whole.then_some(text)),
                '\\' => {
                    if let Some(character) = self.escape() {
                        text.push(character);
                        continue;
                    }
                    whole = false;
                    self.problem(
                        here,
                        self.at.max(here + 1),
                        "an escape that JSON does not have",
                        "write \\\\ for a backslash, \\\" for a quote, \\n for a line end",
                    );
                }
                '\n' => {
                    // Almost always a forgotten quote: the next line is read as JSON again.
                    self.at = here;
                    self.problem(
                        start,
                        here,
                        "a text that runs over the end of its line",
                        "close it with a double quote; write \\n for a line end inside a text",
                    );
                    return Ok(None);
                }
                c if c < ' ' => {
                    whole = false;
                    self.problem(
                        here,
                        here + 1,
                        "a control character inside a text",
                        "write \\t for a tab, \\n for a line end",
                    );
                }
                c => text.push(c),
            }
        }
    }

    fn escape(&mut self) -> Option<char> {
        let kind = self.peek()?;
        if kind == '\n' {
            return None;
        }
        self.at += kind.len_utf8();
        match kind {
            '"' | '\\' | '/' => Some(kind),
            'b' => Some('\u{8}'),
            'f' => Some('\u{c}'),
            'n' => Some('\n'),
            'r' => Some('\r'),
            't' => Some('\t'),
            'u' => self.unicode(),
            _ => None,
        }
    }

    fn unicode(&mut self) -> Option<char> {
        let high = self.hex4()?;
        if !(0xd800..0xdc00).contains(&high) {
            return char::from_u32(high);
        }
        // A character beyond the basic plane is written as two escapes.
        if !self.rest().starts_with("\\u") {
            return None;
        }
        self.at += 2;
        let low = self.hex4()?;
        if !(0xdc00..0xe000).contains(&low) {
            return None;
        }
        char::from_u32(0x1_0000 + ((high - 0xd800) << 10) + (low - 0xdc00))
    }

    fn hex4(&mut self) -> Option<u32> {
        let digits = self.text.get(self.at..self.at + 4)?;
        if !digits.bytes().all(|byte| byte.is_ascii_hexdigit()) {
            return None;
        }
        self.at += 4;
        u32::from_str_radix(digits, 16).ok()
    }
}

/// `-? (0 | [1-9][0-9]*) (. [0-9]+)? ([eE] [+-]? [0-9]+)?`
fn is_number(text: &str) -> bool {
    let unsigned = text.strip_prefix('-').unwrap_or(text);
    let digits = |text: &str| !text.is_empty() && text.bytes().all(|byte| byte.is_ascii_digit());
    let (mantissa, exponent) = match unsigned.split_once(['e', 'E']) {
        Some((mantissa, exponent)) => (mantissa, Some(exponent)),
        None => (unsigned, None),
    };
    let exponent_holds = exponent
        .is_none_or(|exponent| digits(exponent.strip_prefix(['+', '-']).unwrap_or(exponent)));
    let (whole, fraction) = match mantissa.split_once('.') {
        Some((whole, fraction)) => (whole, Some(fraction)),
        None => (mantissa, None),
    };
    digits(whole)
        && (whole == "0" || !whole.starts_with('0'))
        && fraction.is_none_or(digits)
        && exponent_holds
}
