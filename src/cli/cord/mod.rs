//! `tautrail cord`: cards of a lot's cords, and how long each cord on the rig has served.

mod card;
pub mod count;
mod live;
mod plan;
mod service;
mod standing;

pub use service::{check_service, worn_cords};
pub use standing::{print_standing, proof_sentence};

use super::screen::Screen;
use super::{Failure, Verdict};

/// Read cords live, make a cord card from load and unload readings, or list the cords on the rig with their cycles and hours
#[derive(Debug, clap::Args)]
pub struct Args {
    #[command(subcommand)]
    command: Command,
}

#[derive(Debug, clap::Subcommand)]
enum Command {
    Card(card::Args),
    Read(live::Args),
    Service(service::Args),
}

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    match &args.command {
        Command::Card(args) => card::run(args, screen),
        Command::Read(args) => live::run(args, screen),
        Command::Service(args) => service::run(args, screen),
    }
}
