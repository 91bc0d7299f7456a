//! What can be made to go wrong, and the lines that ask for it.

use crate::config::Plan;
use crate::wire::status;

/// Something to go wrong, or to be put right again.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Fault {
    /// On the lines, or in the drivers behind them.
    Link(Which, LinkFault),
    /// On the wheels.
    Wheel(Which, WheelFault),
    /// Everything is put right: lines sound, stop inputs closed, wheels free. A latch stays, as it would.
    Clear,
}

/// All of them, or the one with this index in the plan.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Which {
    /// Every link, or every wheel.
    All,
    /// One of them.
    One(usize),
}

impl Which {
    /// Whether the one with this index is meant.
    #[must_use]
    pub fn has(self, index: usize) -> bool {
        match self {
            Self::All => true,
            Self::One(one) => one == index,
        }
    }
}

/// What can go wrong with a line or the drivers on it.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum LinkFault {
    /// The drivers say nothing that arrives.
    Mute,
    /// The drivers hear nothing.
    Deaf,
    /// Both.
    Cut,
    /// The drivers' end takes no more bytes: what is written waits, until nothing more can be written.
    Blocked,
    /// The line is sound again: no mute, deaf, cut, blocked, lossy, noisy, slow.
    Sound,
    /// Each frame is lost with this probability, both ways.
    Lossy(f64),
    /// Each bit flips with this probability, both ways.
    Noisy(f64),
    /// What the drivers say comes this much later.
    Slow {
        /// In milliseconds.
        late_ms: f64,
    },
    /// The drivers start anew.
    Restart,
    /// The drivers latch by themselves.
    Latch,
    /// The stop input.
    StopInput {
        /// Open: stop.
        open: bool,
    },
    /// Exactly these fault bits stand.
    Bits(u16),
    /// The yaw rate is valid or not.
    Yaw {
        /// It may be used.
        valid: bool,
    },
    /// The supply voltage, without load.
    Supply {
        /// In volts.
        volts: f64,
    },
}

/// What can go wrong with a wheel.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum WheelFault {
    /// It cannot turn.
    Stuck,
    /// Under torque it turns at this share of its greatest speed whatever it is told.
    Runaway {
        /// -1 to 1.
        share: f64,
    },
    /// It turns as told, but its encoder stands still.
    EncoderDead,
    /// It has lost its grip: it turns so many times as fast as told, and does not move the base.
    Skid {
        /// How many times.
        factor: f64,
    },
    /// Nothing is wrong with it.
    Free,
}

/// A line that asks for nothing that is known: what is wrong with it and what would do, in one line.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum FaultMistake {
    /// The first word.
    #[error("there is no `{0}`; `help` lists what there is")]
    NoSuchWord(String),
    /// The number after it.
    #[error("`{word}` needs {needs}, not `{text}`")]
    NoValue {
        /// The first word.
        word: &'static str,
        /// What it needs.
        needs: &'static str,
        /// What stands there.
        text: String,
    },
    /// The name after it.
    #[error("there is no {kind} `{name}`; there are: {}", known.join(", "))]
    NoSuchName {
        /// Link or wheel.
        kind: &'static str,
        /// What stands there.
        name: String,
        /// What could stand there.
        known: Vec<String>,
    },
    /// Something after a word that stands alone.
    #[error("`{word}` stands alone; take out `{text}`")]
    TooMuch {
        /// The word.
        word: &'static str,
        /// What follows it.
        text: String,
    },
}

/// What a line at standard input asks for.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Asked {
    /// A fault.
    Fault(Fault),
    /// The list of words.
    Help,
    /// Where the base is.
    Where,
    /// An empty line.
    Nothing,
}

/// The words, for people. Every word that [`parse`] knows is in it.
pub const HELP: &str = "\
mute [LINK]               the drivers say nothing
deaf [LINK]               the drivers hear nothing
cut [LINK]                both
blocked [LINK]            the drivers' end takes no more bytes: what is written to it waits
sound [LINK]              the line is well again
lossy P [LINK]            each frame is lost with probability P, both ways; 0 ends it
noisy P [LINK]            each bit flips with probability P, both ways; 0 ends it
slow MS [LINK]            what the drivers say comes MS milliseconds later; 0 ends it
restart [LINK]            the drivers start anew
latch [LINK]              the drivers latch by themselves
stop-input open|close [LINK]
over-current [LINK]       so for over-temperature, under-voltage, encoder
no-fault [LINK]           takes those four back
yaw on|off [LINK]         the yaw rate is valid or not
supply VOLTS [LINK]       the supply voltage
stuck [WHEEL]             the wheel cannot turn
runaway SHARE [WHEEL]     under torque it turns at this share (-1 to 1) of its greatest speed, whatever it is told
dead-encoder [WHEEL]      it turns, but is measured standing still
skid FACTOR [WHEEL]       it has lost its grip and turns FACTOR times as fast as told
free [WHEEL]              nothing is wrong with it
clear                     all of these undone; a latch stays
where                     where the base is
help                      this list
Without LINK or WHEEL all of them are meant. Names are those of the configuration.
";

/// Reads one line.
///
/// # Errors
/// In one line, what is wrong and what would do.
pub fn parse(line: &str, plan: &Plan) -> Result<Asked, FaultMistake> {
    let line = line.trim();
    let (first, rest) = split(line);
    let reader = Reader { plan, rest };
    let fault = match first {
        "" => return Ok(Asked::Nothing),
        "help" => return alone("help", rest, Asked::Help),
        "where" => return alone("where", rest, Asked::Where),
        "clear" => return alone("clear", rest, Asked::Fault(Fault::Clear)),
        "mute" => reader.link(LinkFault::Mute),
        "deaf" => reader.link(LinkFault::Deaf),
        "cut" => reader.link(LinkFault::Cut),
        "blocked" => reader.link(LinkFault::Blocked),
        "sound" => reader.link(LinkFault::Sound),
        "restart" => reader.link(LinkFault::Restart),
        "latch" => reader.link(LinkFault::Latch),
        "over-current" => reader.link(LinkFault::Bits(status::OVER_CURRENT)),
        "over-temperature" => reader.link(LinkFault::Bits(status::OVER_TEMPERATURE)),
        "under-voltage" => reader.link(LinkFault::Bits(status::UNDER_VOLTAGE)),
        "encoder" => reader.link(LinkFault::Bits(status::ENCODER)),
        "no-fault" => reader.link(LinkFault::Bits(0)),
        "stuck" => reader.wheel(WheelFault::Stuck),
        "dead-encoder" => reader.wheel(WheelFault::EncoderDead),
        "free" => reader.wheel(WheelFault::Free),
        "lossy" => reader.number("lossy", PROBABILITY, 0.0, 1.0)?.link(LinkFault::Lossy),
        "noisy" => reader.number("noisy", PROBABILITY, 0.0, 1.0)?.link(LinkFault::Noisy),
        "slow" => reader
            .number("slow", "milliseconds from 0 to 60000", 0.0, 60_000.0)?
            .link(|late_ms| LinkFault::Slow { late_ms }),
        "supply" => reader
            .number("supply", "volts from 0 to 65", 0.0, 65.0)?
            .link(|volts| LinkFault::Supply { volts }),
        "runaway" => reader
            .number("runaway", "a share of the greatest speed from -1 to 1", -1.0, 1.0)?
            .wheel(|share| WheelFault::Runaway { share }),
        "skid" => reader
            .number("skid", "a factor from 0 to 10", 0.0, 10.0)?
            .wheel(|factor| WheelFault::Skid { factor }),
        "stop-input" => reader
            .choice("stop-input", "`open` or `close`", "open", "close")?
            .link(|open| LinkFault::StopInput { open }),
        "yaw" => reader.choice("yaw", "`on` or `off`", "on", "off")?.link(|valid| LinkFault::Yaw { valid }),
        unknown => return Err(FaultMistake::NoSuchWord(unknown.to_owned())),
    };
    fault.map(Asked::Fault)
}

const PROBABILITY: &str = "a probability from 0 to 1";

fn split(text: &str) -> (&str, &str) {
    let (first, rest) = text.split_once(char::is_whitespace).unwrap_or((text, ""));
    (first, rest.trim())
}

fn alone(word: &'static str, rest: &str, asked: Asked) -> Result<Asked, FaultMistake> {
    if rest.is_empty() { Ok(asked) } else { Err(FaultMistake::TooMuch { word, text: rest.to_owned() }) }
}

/// What stands after the first word.
#[derive(Clone, Copy)]
struct Reader<'a> {
    plan: &'a Plan,
    rest: &'a str,
}

impl<'a> Reader<'a> {
    fn number(
        self,
        word: &'static str,
        needs: &'static str,
        least: f64,
        most: f64,
    ) -> Result<Valued<'a, f64>, FaultMistake> {
        let (text, rest) = split(self.rest);
        match text.parse::<f64>() {
            Ok(value) if (least..=most).contains(&value) => {
                Ok(Valued { value, reader: Reader { plan: self.plan, rest } })
            }
            Ok(_) | Err(_) => Err(FaultMistake::NoValue { word, needs, text: text.to_owned() }),
        }
    }

    fn choice(
        self,
        word: &'static str,
        needs: &'static str,
        yes: &str,
        no: &str,
    ) -> Result<Valued<'a, bool>, FaultMistake> {
        let (text, rest) = split(self.rest);
        if text != yes && text != no {
            return Err(FaultMistake::NoValue { word, needs, text: text.to_owned() });
        }
        Ok(Valued { value: text == yes, reader: Reader { plan: self.plan, rest } })
    }

    fn link(self, fault: LinkFault) -> Result<Fault, FaultMistake> {
        let names = self.plan.links.iter().map(|link| link.name.as_str());
        Ok(Fault::Link(which("link", self.rest, names)?, fault))
    }

    fn wheel(self, fault: WheelFault) -> Result<Fault, FaultMistake> {
        let names = self.plan.wheels.iter().map(|wheel| wheel.name.as_str());
        Ok(Fault::Wheel(which("wheel", self.rest, names)?, fault))
    }
}

/// A value read, and what stands after it.
struct Valued<'a, T> {
    value: T,
    reader: Reader<'a>,
}

impl<T> Valued<'_, T> {
    fn link(self, fault: impl FnOnce(T) -> LinkFault) -> Result<Fault, FaultMistake> {
        self.reader.link(fault(self.value))
    }

    fn wheel(self, fault: impl FnOnce(T) -> WheelFault) -> Result<Fault, FaultMistake> {
        self.reader.wheel(fault(self.value))
    }
}

fn which<'a>(
    kind: &'static str,
    name: &str,
    names: impl Iterator<Item = &'a str> + Clone,
) -> Result<Which, FaultMistake> {
    if name.is_empty() {
        return Ok(Which::All);
    }
    match names.clone().position(|known| known == name) {
        Some(index) => Ok(Which::One(index)),
        None => Err(FaultMistake::NoSuchName {
            kind,
            name: name.to_owned(),
            known: names.map(str::to_owned).collect(),
        }),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::standin::testing::plan;

    fn fault(line: &str) -> Fault {
        match parse(line, &plan()) {
            Ok(Asked::Fault(fault)) => fault,
            other => panic!("{line}: {other:?}"),
        }
    }

    #[test]
    fn a_name_picks_one_and_no_name_means_all() {
        assert_eq!(fault("mute"), Fault::Link(Which::All, LinkFault::Mute));
        assert_eq!(fault("  mute   rear "), Fault::Link(Which::One(1), LinkFault::Mute));
        assert_eq!(fault("stuck rear left"), Fault::Wheel(Which::One(2), WheelFault::Stuck));
        assert_eq!(
            fault("runaway -0.5 front right"),
            Fault::Wheel(Which::One(1), WheelFault::Runaway { share: -0.5 })
        );
        assert_eq!(fault("lossy 0.25 front"), Fault::Link(Which::One(0), LinkFault::Lossy(0.25)));
        assert_eq!(
            fault("stop-input open rear"),
            Fault::Link(Which::One(1), LinkFault::StopInput { open: true })
        );
        assert_eq!(fault("clear"), Fault::Clear);
    }

    /// Every line of the help begins with a word that the parser knows.
    #[test]
    fn the_help_lists_what_there_is() {
        let mut words = 0;
        for line in HELP.lines().filter(|line| !line.starts_with("Without")) {
            let (word, rest) = split(line);
            let value = match rest.split_whitespace().next() {
                Some("P" | "SHARE" | "FACTOR") => "0.5",
                Some("MS" | "VOLTS") => "12",
                Some("open|close") => "close",
                Some("on|off") => "off",
                _ => "",
            };
            let asked = parse(&format!("{word} {value}"), &plan());
            assert!(asked.is_ok_and(|asked| asked != Asked::Nothing), "{line}");
            words += 1;
        }
        assert_eq!(words, 23);
        for word in ["over-temperature", "under-voltage", "encoder"] {
            assert!(HELP.contains(word) && parse(word, &plan()).is_ok());
        }
    }

    #[test]
    fn a_bad_line_is_answered_in_one_line() {
        for (line, told) in [
            ("frobnicate", "there is no `frobnicate`; `help` lists what there is"),
            ("lossy", "`lossy` needs a probability from 0 to 1, not ``"),
            ("lossy 2", "`lossy` needs a probability from 0 to 1, not `2`"),
            ("lossy nan front", "`lossy` needs a probability from 0 to 1, not `nan`"),
            ("stop-input ajar", "`stop-input` needs `open` or `close`, not `ajar`"),
            ("mute back", "there is no link `back`; there are: front, rear"),
            (
                "stuck front",
                "there is no wheel `front`; there are: front left, front right, rear left, rear right",
            ),
            ("clear all", "`clear` stands alone; take out `all`"),
            ("slow 70000", "`slow` needs milliseconds from 0 to 60000, not `70000`"),
        ] {
            assert_eq!(parse(line, &plan()).map_err(|why| why.to_string()), Err(told.to_owned()));
        }
        assert_eq!(parse("  ", &plan()), Ok(Asked::Nothing));
    }
}
