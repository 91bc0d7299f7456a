//! The text of a script, checked: every mistake with its line.

use crate::config::{PadAxis, PadButton};

/// gilrs' names of axes.
pub(super) const AXES: [(&str, PadAxis); 8] = [
    ("LeftStickX", PadAxis::LeftStickX),
    ("LeftStickY", PadAxis::LeftStickY),
    ("LeftZ", PadAxis::LeftZ),
    ("RightStickX", PadAxis::RightStickX),
    ("RightStickY", PadAxis::RightStickY),
    ("RightZ", PadAxis::RightZ),
    ("DPadX", PadAxis::DPadX),
    ("DPadY", PadAxis::DPadY),
];

/// gilrs' names of buttons.
pub(super) const BUTTONS: [(&str, PadButton); 19] = [
    ("South", PadButton::South),
    ("East", PadButton::East),
    ("North", PadButton::North),
    ("West", PadButton::West),
    ("C", PadButton::C),
    ("Z", PadButton::Z),
    ("LeftTrigger", PadButton::LeftTrigger),
    ("LeftTrigger2", PadButton::LeftTrigger2),
    ("RightTrigger", PadButton::RightTrigger),
    ("RightTrigger2", PadButton::RightTrigger2),
    ("Select", PadButton::Select),
    ("Start", PadButton::Start),
    ("Mode", PadButton::Mode),
    ("LeftThumb", PadButton::LeftThumb),
    ("RightThumb", PadButton::RightThumb),
    ("DPadUp", PadButton::DPadUp),
    ("DPadDown", PadButton::DPadDown),
    ("DPadLeft", PadButton::DPadLeft),
    ("DPadRight", PadButton::DPadRight),
];

/// The inputs that are words and take no value.
const WORDS: [(&str, Action); 4] =
    [("unplug", Action::Unplug), ("plug", Action::Plug), ("silent", Action::Silent), ("end", Action::End)];

/// A checked script: lines in the order of time.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Script {
    lines: Vec<Line>,
}

/// One line of a script.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Line {
    /// Seconds after the script's beginning.
    pub at_s: f64,
    /// What the hands do then.
    pub action: Action,
}

/// What a line does.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Action {
    /// A control goes to a value: axes -1 to 1, buttons 0 to 1.
    Set(Control, f64),
    /// The pad is pulled out.
    Unplug,
    /// The pad is plugged in.
    Plug,
    /// The pad stops giving signs of life.
    Silent,
    /// The script is over.
    End,
}

/// An axis or a button.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Control {
    /// An axis.
    Axis(PadAxis),
    /// A button.
    Button(PadButton),
}

/// One thing that is wrong with a script.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
#[error("line {line}: {problem}")]
pub struct HandsMistake {
    /// Counted from 1.
    pub line: usize,
    /// What is wrong with it.
    pub problem: HandsProblem,
}

/// What is wrong with a line, what was read and what would do.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum HandsProblem {
    /// Not three parts.
    #[error(
        "{found} part(s) in `{text}`; a line is `seconds,input,value`, the value left empty after a word"
    )]
    NotThreeParts {
        /// How many there are.
        found: usize,
        /// The line.
        text: String,
    },
    /// A heading line.
    #[error("a script has no heading line; take it out")]
    Heading,
    /// The first part is no time.
    #[error("`{text}` is no time; write seconds from the beginning, 0 or more")]
    NoTime {
        /// What stands there.
        text: String,
    },
    /// Earlier than the line before.
    #[error("{at_s} s is before {after_s} s of line {after_line}; put the lines in the order of time")]
    NotInOrder {
        /// The time read.
        at_s: f64,
        /// The time that it must not be before.
        after_s: f64,
        /// Where that stands.
        after_line: usize,
    },
    /// The second part names nothing.
    #[error("there is no input `{text}`; {}", known_inputs(text))]
    NoSuchInput {
        /// What stands there.
        text: String,
    },
    /// The third part is no number in the control's range.
    #[error("`{text}` is no value for {input}; write a number from {least} to 1")]
    NoValue {
        /// What stands there.
        text: String,
        /// The control.
        input: &'static str,
        /// -1 for an axis, 0 for a button.
        least: f64,
    },
    /// A word with a value.
    #[error("`{word}` takes no value, but `{text}` follows it; leave it empty")]
    ValueAfterWord {
        /// The word.
        word: &'static str,
        /// What stands there.
        text: String,
    },
    /// Something after `end`.
    #[error("the script ended at line {end_line}; nothing can follow `end`")]
    AfterEnd {
        /// Where `end` stands.
        end_line: usize,
    },
}

impl Script {
    /// Reads a script.
    ///
    /// # Errors
    /// Every line that is wrong, in the order of the text.
    pub fn parse(text: &str) -> Result<Self, Vec<HandsMistake>> {
        let mut lines: Vec<Line> = Vec::new();
        let mut mistakes = Vec::new();
        let mut latest = (0.0, 0);
        let mut end_line = None;
        for (line, text) in (1..).zip(text.trim_start_matches('\u{feff}').lines()) {
            let text = text.split('#').next().unwrap_or_default().trim();
            if text.is_empty() {
                continue;
            }
            let read = match end_line {
                Some(end_line) => Err(HandsProblem::AfterEnd { end_line }),
                None => read_line(text, latest),
            };
            match read {
                Ok(read) => {
                    latest = (read.at_s, line);
                    if read.action == Action::End {
                        end_line = Some(line);
                    }
                    lines.push(read);
                }
                Err(problem) => mistakes.push(HandsMistake { line, problem }),
            }
        }
        if mistakes.is_empty() { Ok(Self { lines }) } else { Err(mistakes) }
    }

    /// The lines, in the order of time.
    #[must_use]
    pub fn lines(&self) -> &[Line] {
        &self.lines
    }

    /// When the `end` line comes, where there is one.
    #[must_use]
    pub fn end_s(&self) -> Option<f64> {
        self.lines.last().filter(|line| line.action == Action::End).map(|line| line.at_s)
    }
}

/// One line without comment and blanks at its ends; `latest` is the time and number of the line before.
fn read_line(text: &str, latest: (f64, usize)) -> Result<Line, HandsProblem> {
    let mut parts = text.split(',').map(str::trim);
    let (Some(time), Some(input), Some(value), None) =
        (parts.next(), parts.next(), parts.next(), parts.next())
    else {
        return Err(HandsProblem::NotThreeParts { found: text.split(',').count(), text: text.to_owned() });
    };
    let (after_s, after_line) = latest;
    match time.parse::<f64>() {
        Ok(at_s) if at_s.is_finite() && at_s >= 0.0 => {
            if at_s < after_s {
                return Err(HandsProblem::NotInOrder { at_s, after_s, after_line });
            }
            Ok(Line { at_s, action: read_action(input, value)? })
        }
        Err(_) if time.eq_ignore_ascii_case("seconds") => Err(HandsProblem::Heading),
        Ok(_) | Err(_) => Err(HandsProblem::NoTime { text: time.to_owned() }),
    }
}

fn read_action(input: &str, value: &str) -> Result<Action, HandsProblem> {
    if let Some((word, action)) = WORDS.iter().find(|(word, _)| *word == input) {
        if value.is_empty() {
            return Ok(*action);
        }
        return Err(HandsProblem::ValueAfterWord { word, text: value.to_owned() });
    }
    let axis = AXES.iter().find(|(name, _)| *name == input);
    let button = BUTTONS.iter().find(|(name, _)| *name == input);
    let (name, control, least) = match (axis, button) {
        (Some((name, axis)), _) => (*name, Control::Axis(*axis), -1.0),
        (None, Some((name, button))) => (*name, Control::Button(*button), 0.0),
        (None, None) => return Err(HandsProblem::NoSuchInput { text: input.to_owned() }),
    };
    match value.parse::<f64>() {
        Ok(number) if (least..=1.0).contains(&number) => Ok(Action::Set(control, number)),
        Ok(_) | Err(_) => Err(HandsProblem::NoValue { text: value.to_owned(), input: name, least }),
    }
}

/// What could have been meant: the name that differs only by case, else all of them.
fn known_inputs(text: &str) -> String {
    let names = || {
        let axes = AXES.iter().map(|(name, _)| *name);
        let buttons = BUTTONS.iter().map(|(name, _)| *name);
        axes.chain(buttons).chain(WORDS.iter().map(|(word, _)| *word))
    };
    match names().find(|name| name.eq_ignore_ascii_case(text)) {
        Some(name) => format!("write `{name}`"),
        None => format!("there are {}", names().collect::<Vec<_>>().join(", ")),
    }
}
