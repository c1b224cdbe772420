//! `watch`: what happens on the bench, line by line, until interrupted.

use anyhow::Result;
use daemon::view::{EventBody, SinkView};

use crate::arguments::SinkOf;
use crate::client::{Events, Heard};
use crate::exit::Exit;
use crate::output::{Output, tell};
use crate::print;

pub(super) fn carry_out(of: &SinkOf, output: Output) -> Result<Exit> {
    let client = of.at.client()?;
    if let Some(sink) = &of.sink {
        // A name that is not on the bench would be waited for in vain.
        let _: SinkView = client.get(&format!("/v1/sinks/{sink}"))?;
    }
    let wanted = |name: &str| of.sink.as_deref().is_none_or(|sink| sink == name);
    let mut events = Events::open(&client)?;
    loop {
        match events.next() {
            Heard::Standing => tell("the daemon can be reached again"),
            Heard::Broken(error) => tell(format_args!("{error}; trying again")),
            Heard::Event(event) => match &*event {
                EventBody::Sink(view) if wanted(&view.name) => {
                    output.give_line(&*event, |out, _| print::sink_line(out, view))?;
                }
                EventBody::Run(news) if wanted(&news.sink) => {
                    output.give_line(&*event, |out, _| {
                        writeln!(out, "{}  {}  {}", news.at, news.sink, news.message)
                    })?;
                }
                EventBody::Link(link) if wanted(&link.sink) => {
                    output.give_line(&*event, |out, _| {
                        let reason = link.reason.as_deref().unwrap_or_default();
                        writeln!(
                            out,
                            "{}  {}  link {} {reason}",
                            link.at,
                            link.sink,
                            print::words(&link.state)
                        )
                    })?;
                }
                EventBody::Gone(_) => {
                    tell("some events were missed while the daemon could not be reached");
                }
                EventBody::Sink(_) | EventBody::Run(_) | EventBody::Link(_) => {}
            },
        }
    }
}
