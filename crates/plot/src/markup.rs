//! Markup under construction: literals of the program, and escaped text of everyone else.
//!
//! Invariant: whatever is not a `'static` literal passes [`Markup::text`] or is a number. A
//! record can hold any text; none of it can become markup.
//!
//! What it deliberately does not do: know what a page looks like.

use std::fmt::Write as _;

/// A piece of markup.
#[derive(Debug, Clone, Default)]
pub struct Markup(String);

impl Markup {
    /// Nothing yet.
    pub fn new() -> Self {
        Self::default()
    }

    /// Escaped text alone.
    pub fn of(text: impl AsRef<str>) -> Self {
        let mut markup = Self::new();
        markup.text(text);
        markup
    }

    /// A literal of the program.
    pub fn raw(&mut self, literal: &'static str) -> &mut Self {
        self.0.push_str(literal);
        self
    }

    /// Text from anywhere, escaped for element content and quoted attributes alike.
    ///
    /// Control characters and those that turn the direction of writing are shown as U+FFFD:
    /// the first are no HTML, the second can make a line read as what it does not say.
    pub fn text(&mut self, text: impl AsRef<str>) -> &mut Self {
        for letter in text.as_ref().chars() {
            match letter {
                '&' => self.0.push_str("&amp;"),
                '<' => self.0.push_str("&lt;"),
                '>' => self.0.push_str("&gt;"),
                '"' => self.0.push_str("&quot;"),
                '\'' => self.0.push_str("&#39;"),
                '\n' | '\t' => self.0.push(letter),
                _ if letter.is_control() || turns_direction(letter) => self.0.push('\u{fffd}'),
                _ => self.0.push(letter),
            }
        }
        self
    }

    /// Another piece.
    pub fn add(&mut self, other: &Self) -> &mut Self {
        self.0.push_str(&other.0);
        self
    }

    /// A coordinate of a drawing, to a tenth of its unit.
    pub fn at(&mut self, coordinate: f64) -> &mut Self {
        let tenths = (coordinate * 10.0).round() / 10.0;
        // Minus zero would be written with its sign.
        let _ = write!(self.0, "{}", tenths + 0.0);
        self
    }

    /// A number of a data block, with so many decimals at most.
    pub fn number(&mut self, value: f64, decimals: usize) -> &mut Self {
        if !value.is_finite() {
            self.0.push_str("null");
            return self;
        }
        let written = format!("{value:.decimals$}");
        let short = if written.contains('.') {
            written.trim_end_matches('0').trim_end_matches('.')
        } else {
            &written
        };
        self.0.push_str(if short == "-0" { "0" } else { short });
        self
    }

    /// `<tag>text</tag>`.
    pub fn element(&mut self, tag: &'static str, text: impl AsRef<str>) -> &mut Self {
        self.raw("<").raw(tag).raw(">").text(text);
        self.raw("</").raw(tag).raw(">")
    }

    /// A string of a style sheet, quotes included: all but the plainest letters as code points.
    pub fn style_string(&mut self, text: &str) -> &mut Self {
        self.0.push('"');
        for letter in text.chars() {
            if letter.is_ascii_alphanumeric() || matches!(letter, ' ' | '-' | '.' | ',') {
                self.0.push(letter);
            } else if letter.is_control() || turns_direction(letter) {
                self.0.push('\u{fffd}');
            } else {
                let _ = write!(self.0, "\\{:06x}", u32::from(letter));
            }
        }
        self.0.push('"');
        self
    }

    /// Whether nothing was written.
    pub fn is_empty(&self) -> bool {
        self.0.is_empty()
    }

    /// The text.
    pub fn into_string(self) -> String {
        self.0
    }
}

/// Bidirectional controls: U+061C, U+200E, U+200F, U+202A to U+202E, U+2066 to U+2069.
const fn turns_direction(letter: char) -> bool {
    matches!(
        letter,
        '\u{61c}' | '\u{200e}' | '\u{200f}' | '\u{202a}'..='\u{202e}' | '\u{2066}'..='\u{2069}'
    )
}
