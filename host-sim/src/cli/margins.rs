//! `hedgerow margins`.
use super::{Ending, Failure};
/// Find how far each imperfection can go before a play stops settling.
#[derive(Clone, Debug, clap::Args)]
#[command(after_help = "Example:\n  hedgerow margins")]
pub struct Args {}
/// Run it.
///
/// Errors: none.
pub fn run(_args: &Args) -> Result<Ending, Failure> {
    Ok(Ending::Kept)
}
