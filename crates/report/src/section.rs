//! The page's sections, each from what it is told to a piece of markup.
//!
//! What they deliberately do not do: read a file, or compute anything but words.

mod brief;
mod cautions;
mod certificate;
mod course;
mod defence;
mod interlocks;
mod results;
mod subject;
mod submitted;

pub(crate) use brief::in_brief;
pub(crate) use cautions::cautions;
pub(crate) use certificate::certificate;
pub(crate) use course::course;
pub(crate) use defence::defence;
pub(crate) use interlocks::interlocks;
pub(crate) use results::results;
pub(crate) use subject::subject;
pub(crate) use submitted::submitted;

use plot::Markup;

/// A table of two columns: what, and what it is. Empty values are left out.
#[derive(Default)]
struct WhatIs {
    rows: Markup,
}

impl WhatIs {
    fn row(&mut self, what: &'static str, is: impl AsRef<str>) -> &mut Self {
        self.row_with(what, &Markup::of(is))
    }

    fn row_with(&mut self, what: &'static str, is: &Markup) -> &mut Self {
        if is.is_empty() {
            return self;
        }
        self.rows.raw("<tr><th scope=\"row\">").raw(what);
        self.rows.raw("</th><td>").add(is).raw("</td></tr>\n");
        self
    }

    fn table(&self) -> Markup {
        let mut table = Markup::new();
        table
            .raw("<table class=\"what-is\"><tbody>\n")
            .add(&self.rows);
        table.raw("</tbody></table>\n");
        table
    }
}

/// The head of a table.
fn table_head(columns: &[(&'static str, &'static str)]) -> Markup {
    let mut head = Markup::new();
    head.raw("<thead><tr>");
    for (class, column) in columns {
        head.raw("<th scope=\"col\" class=\"").raw(class).raw("\">");
        head.raw(column).raw("</th>");
    }
    head.raw("</tr></thead>\n<tbody>\n");
    head
}
