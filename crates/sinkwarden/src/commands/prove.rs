//! `prove`: whether a firmware keeps the protocol's guarantees.

use anyhow::Result;
use quantity::Current;

use crate::arguments::Prove;
use crate::exit::{Exit, hinted};
use crate::output::{Output, tell};
use crate::progress::Progress;

pub(super) fn carry_out(arguments: &Prove, output: Output) -> Result<Exit> {
    if let Some(most) = arguments.with_source
        && most <= Current::ZERO
    {
        return Err(hinted(
            format!("--with-source is {most}, and nothing can be drawn of that"),
            "give a current above zero, or leave --with-source out to draw nothing",
        ));
    }
    let options = prove::Options {
        source: arguments.with_source,
        late: arguments.late,
        ..prove::Options::default()
    };
    let mut port = prove::open(&arguments.port, arguments.baud)?;
    match options.source {
        None => tell("nothing is drawn; what needs a current is not shown"),
        Some(most) => tell(format_args!(
            "at most {most} is drawn from what is connected; stay beside it"
        )),
    }
    let mut bar = Progress::towards(prove::guarantees().count() as u64);
    let report = prove::run(port.as_mut(), &options, &mut |progress| {
        if let prove::Progress::Begins {
            place, guarantee, ..
        } = progress
        {
            bar.at(place as u64, guarantee.name);
        }
    })?;
    bar.finish();
    output.give(&report, |out, report| write!(out, "{report}"))?;
    Ok(if report.holds() {
        Exit::Done
    } else {
        Exit::Unproven
    })
}
