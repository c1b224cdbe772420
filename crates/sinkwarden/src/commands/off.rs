//! `off`: every sink, or one.

use anyhow::Result;
use daemon::view::{OffList, OffView};

use crate::arguments::SinkOf;
use crate::client::RequestError;
use crate::exit::{Exit, hinted};
use crate::output::Output;
use crate::print;

/// What to do when the software cannot.
const BY_HAND: &str =
    "open the switch in series with the device under test by hand, then look at the sink";

pub(super) fn carry_out(of: &SinkOf, output: Output) -> Result<Exit> {
    let client = of.at.client()?;
    let answer = match &of.sink {
        Some(sink) => client
            .post::<OffView>(&format!("/v1/sinks/{sink}/off"))
            .map(|view| OffList {
                acknowledged: view.acknowledged,
                sinks: vec![view],
            }),
        None => client.post("/v1/off"),
    };
    let list = match answer {
        Ok(list) => list,
        Err(RequestError::Refused(problem)) => {
            return Err(RequestError::Refused(problem).into());
        }
        Err(error) => return Err(hinted(error.to_string(), BY_HAND)),
    };
    output.give(&list, print::off)?;
    if list.acknowledged {
        return Ok(Exit::Done);
    }
    let silent: Vec<&str> = list
        .sinks
        .iter()
        .filter(|sink| !sink.acknowledged)
        .map(|sink| sink.sink.as_str())
        .collect();
    Err(hinted(
        format!(
            "{} did not say that it is off; a sink that hears nothing turns itself off after its deadman interval, a shorted MOSFET does not",
            silent.join(", ")
        ),
        BY_HAND,
    ))
}
