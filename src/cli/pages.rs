//! What is made from the shapes of the command line itself: completions for shells, and the manual page.

use clap::Command;
use clap_complete::Shell;
use std::io::{self, Write};

/// What a shell needs to complete the commands.
pub(super) fn completions(program: &mut Command, shell: Shell) -> Vec<u8> {
    let mut text = Vec::new();
    clap_complete::generate(shell, program, "drainwise", &mut text);
    text
}

/// The manual, one page: the program, then each command with its options.
pub(super) fn manual(mut whole: Command) -> io::Result<Vec<u8>> {
    let mut text = Vec::new();
    whole.build();
    let page = clap_mangen::Man::new(whole.clone());
    page.render_title(&mut text)?;
    page.render_name_section(&mut text)?;
    page.render_synopsis_section(&mut text)?;
    for command in whole.get_subcommands().filter(|command| command.get_name() != "help") {
        let mut part = Vec::new();
        let page = clap_mangen::Man::new(command.clone());
        page.render_synopsis_section(&mut part)?;
        page.render_description_section(&mut part)?;
        page.render_options_section(&mut part)?;
        writeln!(text, ".SH \"DRAINWISE {}\"", command.get_name().to_uppercase())?;
        for line in String::from_utf8_lossy(&part).lines() {
            match line.strip_prefix(".SH ") {
                Some(title) => writeln!(text, ".SS {title}")?,
                None => writeln!(text, "{line}")?,
            }
        }
    }
    page.render_extra_section(&mut text)?;
    page.render_version_section(&mut text)?;
    Ok(text)
}
