//! `status`: every sink of the daemon as it is now.

use anyhow::Result;
use daemon::view::SinkList;

use crate::arguments::SinkOf;
use crate::exit::{Exit, hinted};
use crate::output::Output;
use crate::print;

pub(super) fn carry_out(of: &SinkOf, output: Output) -> Result<Exit> {
    let client = of.at.client()?;
    let mut list: SinkList = client.get("/v1/sinks")?;
    if let Some(wanted) = &of.sink {
        let names: Vec<String> = list.sinks.iter().map(|sink| sink.name.clone()).collect();
        list.sinks.retain(|sink| sink.name == *wanted);
        if list.sinks.is_empty() {
            return Err(hinted(
                format!("the daemon at {} has no sink `{wanted}`", client.base()),
                format!("its sinks are: {}", names.join(", ")),
            ));
        }
    }
    output.give(&list, print::sinks)?;
    Ok(Exit::Done)
}
