//! `veerlog handout WHAT`: what a shell or a manual reader wants, made from the same definitions as the program's help.

use std::io;

use clap::{Args, CommandFactory, ValueEnum};
use clap_complete::Shell;

use super::{Cli, Outcome};
use crate::Error;

/// Shown below the help.
const EXAMPLES: &str = "\
Examples:
  veerlog handout bash > ~/.local/share/bash-completion/completions/veerlog
  veerlog handout zsh > ~/.zfunc/_veerlog          # a folder of $fpath
  veerlog handout fish > ~/.config/fish/completions/veerlog.fish
  veerlog handout manual > ~/.local/share/man/man1/veerlog.1";

/// Print completions for a shell, or the manual page
#[derive(Debug, Args)]
#[command(after_help = EXAMPLES)]
pub(super) struct HandoutArgs {
    /// What to print
    #[arg(value_enum)]
    what: What,
}

/// What can be handed out.
#[derive(Debug, Clone, Copy, PartialEq, Eq, ValueEnum)]
enum What {
    /// The manual page (roff)
    Manual,
    /// Completions
    Bash,
    /// Completions
    Elvish,
    /// Completions
    Fish,
    /// Completions
    Powershell,
    /// Completions
    Zsh,
}

/// Makes the text.
///
/// # Errors
/// [`Error::Io`] where the page cannot be made.
pub(super) fn run(args: &HandoutArgs) -> Result<Outcome, Error> {
    let mut text = Vec::new();
    let mut command = Cli::command();
    let shell = match args.what {
        What::Manual => None,
        What::Bash => Some(Shell::Bash),
        What::Elvish => Some(Shell::Elvish),
        What::Fish => Some(Shell::Fish),
        What::Powershell => Some(Shell::PowerShell),
        What::Zsh => Some(Shell::Zsh),
    };
    match shell {
        Some(shell) => clap_complete::generate(shell, &mut command, "veerlog", &mut text),
        None => manual(command, &mut text).map_err(|source| Error::Io { path: "the manual page".into(), source })?,
    }
    Ok(Outcome { text: String::from_utf8_lossy(&text).into_owned(), plain: true, ..Outcome::default() })
}

/// The page of the program, then a section a command.
fn manual(command: clap::Command, out: &mut Vec<u8>) -> io::Result<()> {
    let whole = clap_mangen::Man::new(command.clone()).manual("User commands");
    whole.render(out)?;
    for part in command.get_subcommands().filter(|part| part.get_name() != "help") {
        let page = clap_mangen::Man::new(part.clone().bin_name(format!("veerlog {}", part.get_name())));
        out.extend(format!(".SH \"{}\"\n", part.get_name().to_uppercase()).bytes());
        page.render_description_section(out)?;
        page.render_synopsis_section(out)?;
        page.render_options_section(out)?;
        page.render_extra_section(out)?;
    }
    Ok(())
}
