//! The flags of a run, made from the registry of settings; their values are taken as typed.

use clap::{Arg, ArgAction, ArgMatches, Args, Command, FromArgMatches};
use ropewalk::run::config::registry::{Key, SETTINGS, Setting, TABLES, Takes};

/// Settings given by flags, each with all its values in the order typed.
#[derive(Debug, Clone, Default)]
pub struct Flags(pub Vec<(Key, Vec<String>)>);

impl Args for Flags {
    fn augment_args(command: Command) -> Command {
        SETTINGS.iter().filter(|s| !s.flag.is_empty()).fold(command, |c, s| c.arg(arg(s)))
    }

    fn augment_args_for_update(command: Command) -> Command {
        Self::augment_args(command)
    }
}

impl FromArgMatches for Flags {
    fn from_arg_matches(matches: &ArgMatches) -> Result<Self, clap::Error> {
        let typed = |s: &Setting| matches.get_many::<String>(s.flag).map(|v| (s.key, v.cloned().collect()));
        Ok(Flags(SETTINGS.iter().filter(|s| !s.flag.is_empty()).filter_map(typed).collect()))
    }

    fn update_from_arg_matches(&mut self, matches: &ArgMatches) -> Result<(), clap::Error> {
        *self = Self::from_arg_matches(matches)?;
        Ok(())
    }
}

fn arg(s: &'static Setting) -> Arg {
    let heading = TABLES.iter().find(|(t, _, _)| *t == s.table).map(|(_, heading, _)| *heading);
    let mut help = s.help.to_string();
    if s.key == Key::Families {
        help += "; the indicators stand at the end of this help";
    }
    if s.takes == Takes::Many {
        help += " (repeatable)";
    }
    if !s.choices.is_empty() {
        help += &format!(" [one of: {}]", s.choices.join(", "));
    }
    if !s.default.is_empty() {
        help += &format!(" [default: {}]", s.default);
    }
    // Values are judged together, with all other settings: here they are only taken, any number of times.
    let arg = Arg::new(s.flag).long(s.flag).value_name(s.value).help(help).help_heading(heading).action(ArgAction::Append);
    let arg = match s.short {
        Some(letter) => arg.short(letter),
        None => arg,
    };
    match (s.takes, s.key) {
        (Takes::Switch, _) => arg.num_args(0..=1).require_equals(true).default_missing_value("yes"),
        // Numbers that may begin with a sign and go on with more than digits: -pi, -1,0,0.
        (_, Key::Lengths | Key::Spacing | Key::Origin | Key::Times | Key::Frame) => arg.allow_hyphen_values(true),
        _ => arg.allow_negative_numbers(true),
    }
}
