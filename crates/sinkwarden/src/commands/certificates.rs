//! `certificates`: those beside a bench file, with drift and verifications.

use anyhow::Result;
use daemon::Certificates;

use crate::arguments::CertificatesOf;
use crate::exit::Exit;
use crate::output::Output;
use crate::print;

pub(super) fn carry_out(of: &CertificatesOf, output: Output) -> Result<Exit> {
    let now = jiff::Timestamp::now().as_second();
    let list = Certificates::beside(&of.bench).list(of.sink.as_deref(), now)?;
    output.give(&list, print::certificates)?;
    Ok(if list.troubles.is_empty() {
        Exit::Done
    } else {
        Exit::Failed
    })
}
