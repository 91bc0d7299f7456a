#![expect(clippy::float_cmp, reason = "values that are set, or handed on as they are")]

use super::*;

/// The defaults.
fn plan() -> PadPlan {
    crate::standin::testing::plan().pad
}

fn hands(text: &str) -> Hands {
    Hands::new(Script::parse(text).unwrap(), &plan())
}

/// The clock stands 100 s ahead of the script.
fn clock(elapsed_s: f64) -> Mono {
    Mono::from_ns(s_to_ns(100.0 + elapsed_s))
}

fn at(hands: &mut Hands, elapsed_s: f64) -> PadInput {
    hands.at(elapsed_s, clock(elapsed_s))
}

fn mistakes(text: &str) -> Vec<String> {
    Script::parse(text).unwrap_err().iter().map(ToString::to_string).collect()
}

#[test]
fn sticks_are_mapped_with_their_signs() {
    let mut hands = hands("0,LeftStickY,0.5\n0,LeftStickX,0.25\n0,RightStickX,-1\n1,LeftStickY,-1\n");
    assert_eq!(at(&mut hands, 0.0).sticks, Sticks { x: 0.5, y: -0.25, turn: 1.0 });
    assert_eq!(at(&mut hands, 0.999).sticks.x, 0.5);
    assert_eq!(at(&mut hands, 1.0).sticks.x, -1.0);
}

#[test]
fn another_mapping_is_followed() {
    let other = PadPlan {
        forward: SignedAxis { axis: PadAxis::DPadY, inverted: true },
        hold: PadButton::South,
        stop: PadButton::Z,
        ..plan()
    };
    let script = Script::parse("0,DPadY,1\n0,South,0.5\n0,Z,1\n0,East,1").unwrap();
    let pad = Hands::new(script, &other).at(0.0, clock(0.0));
    assert_eq!((pad.sticks.x, pad.hold, pad.down), (-1.0, 0.5, Buttons::STOP));
}

#[test]
fn the_hold_control_is_a_value_and_its_least_since_the_last_tick_is_kept() {
    let mut hands = hands("1,RightTrigger2,0.7\n2,RightTrigger2,0.1\n2.001,RightTrigger2,0.9\n");
    assert_eq!((at(&mut hands, 1.0).hold, at(&mut hands, 1.5).hold_least), (0.7, 0.7));
    let pad = at(&mut hands, 2.005);
    assert_eq!((pad.hold, pad.hold_least), (0.9, 0.1));
    let pad = at(&mut hands, 2.010);
    assert_eq!((pad.hold, pad.hold_least), (0.9, 0.9));
}

#[test]
fn a_press_between_two_ticks_is_not_lost_and_is_told_once() {
    let mut hands = hands("1,East,1\n1.001,East,0\n2,Start,1\n");
    assert_eq!(at(&mut hands, 0.9).pressed, Buttons::default());
    let pad = at(&mut hands, 1.005);
    assert_eq!((pad.down, pad.pressed), (Buttons::default(), Buttons::STOP));
    let pad = at(&mut hands, 2.0);
    assert_eq!((pad.down, pad.pressed), (Buttons::READY, Buttons::READY));
    let pad = at(&mut hands, 2.005);
    assert_eq!((pad.down, pad.pressed), (Buttons::READY, Buttons::default()));
}

/// gilrs: a button is pressed from 0.75 on and released below 0.65 (tried).
#[test]
fn a_button_with_a_value_has_two_thresholds() {
    let mut hands = hands("0,Select,0.7\n1,Select,0.75\n2,Select,0.66\n3,Select,0.64\n4,Select,0.7");
    let down: Vec<bool> = (0..5).map(|s| at(&mut hands, f64::from(s)).down.has(Buttons::RESET)).collect();
    assert_eq!(down, [false, true, true, false, false]);
}

#[test]
fn every_meaning_has_its_button() {
    for (name, meaning) in [
        ("Start", Buttons::READY),
        ("Select", Buttons::RESET),
        ("East", Buttons::STOP),
        ("DPadUp", Buttons::PACE_UP),
        ("DPadDown", Buttons::PACE_DOWN),
        ("North", Buttons::FRAME),
        ("West", Buttons::ZERO_HEADING),
    ] {
        let pad = at(&mut hands(&format!("0,{name},1")), 0.0);
        assert_eq!((pad.down, pad.pressed), (meaning, meaning), "{name}");
    }
}

#[test]
fn a_silent_pad_keeps_its_values_and_gives_no_sign_until_the_next_line() {
    let mut hands = hands("1,LeftStickY,1\n2,silent,\n5,LeftStickY,0.5\n");
    assert_eq!(at(&mut hands, 1.5).last_sign, clock(1.5));
    let pad = at(&mut hands, 2.2);
    assert!(pad.present);
    assert_eq!((pad.sticks.x, pad.last_sign), (1.0, clock(2.0)));
    assert_eq!(at(&mut hands, 4.9).last_sign, clock(2.0));
    let pad = at(&mut hands, 5.0);
    assert_eq!((pad.sticks.x, pad.last_sign), (0.5, clock(5.0)));
    assert_eq!(at(&mut hands, 5.5).last_sign, clock(5.5));
}

#[test]
fn an_unplugged_pad_is_not_there_and_all_is_at_rest() {
    let mut hands = hands(
        "0,LeftStickY,1\n0,RightTrigger2,1\n0,East,1\n1,unplug,\n2,plug,\n3,unplug,\n3.5,North,1\n4,plug,\n",
    );
    assert!(at(&mut hands, 0.5).present);
    let pad = at(&mut hands, 1.0);
    assert_eq!(pad, PadInput { streams: true, last_sign: clock(1.0), ..PadInput::default() });
    assert_eq!(at(&mut hands, 1.9), pad, "nothing moves while it is gone");
    let pad = at(&mut hands, 2.0);
    assert!(pad.present);
    assert_eq!((pad.sticks, pad.hold, pad.down), (Sticks::default(), 0.0, Buttons::default()));
    assert_eq!(at(&mut hands, 3.9).down, Buttons::default());
    let pad = at(&mut hands, 4.0);
    assert_eq!((pad.down, pad.pressed), (Buttons::FRAME, Buttons::default()), "held, but no press was seen");
}

#[test]
fn an_unplug_is_said_once_even_if_the_plug_follows_at_once() {
    let mut hands = hands("0,RightTrigger2,1\n1,unplug,\n1.001,RightTrigger2,1\n1.002,plug,");
    assert_eq!(at(&mut hands, 0.5).hold, 1.0);
    assert!(!at(&mut hands, 1.005).present);
    let pad = at(&mut hands, 1.010);
    assert!(pad.present);
    assert_eq!((pad.hold, pad.hold_least), (1.0, 0.0));
}

#[test]
fn the_end_line_ends() {
    let mut with_end = hands("0,East,0\n3,end,\n");
    assert!(!with_end.ended(2.999) && with_end.ended(3.0));
    assert!(at(&mut with_end, 4.0).present, "the pad stays");
    assert!(!hands("0,East,0").ended(1e9));
    assert!(!hands("").ended(1e9));
}

#[test]
fn comments_blank_lines_and_foreign_line_ends_mean_nothing() {
    let script = Script::parse("\u{feff}# a script\r\n\r\n 0.5 , East , 1 # stop\r\n1,end,\r\n").unwrap();
    assert_eq!(script.lines().len(), 2);
    assert_eq!(
        script.lines()[0],
        Line { at_s: 0.5, action: Action::Set(Control::Button(PadButton::East), 1.0) }
    );
    assert_eq!(script.end_s(), Some(1.0));
}

#[test]
fn every_mistake_is_told_with_its_line() {
    let text = "seconds,input,value\n0,East\n-1,East,1\nnan,East,1\n2,East,1\n1,East,0\n2,east,1\n2,Wheel,1\n\
                2,East,1.5\n2,East,-0.5\n2,LeftStickX,-1\n2,LeftStickX,\n2,LeftStickX,NaN\n2,unplug,1\n3,end,\n4,East,1\n";
    let told = mistakes(text);
    let lines: Vec<usize> = Script::parse(text).unwrap_err().iter().map(|m| m.line).collect();
    assert_eq!(lines, [1, 2, 3, 4, 6, 7, 8, 9, 10, 12, 13, 14, 16], "{told:#?}");
    assert_eq!(told[0], "line 1: a script has no heading line; take it out");
    assert!(told[1].contains("2 part(s) in `0,East`"), "{}", told[1]);
    assert_eq!(told[4], "line 6: 1 s is before 2 s of line 5; put the lines in the order of time");
    assert_eq!(told[5], "line 7: there is no input `east`; write `East`");
    assert!(
        told[6].contains("LeftStickX") && told[6].contains("RightTrigger2") && told[6].contains("silent")
    );
    assert_eq!(told[7], "line 9: `1.5` is no value for East; write a number from 0 to 1");
    assert_eq!(told[9], "line 12: `` is no value for LeftStickX; write a number from -1 to 1");
    assert_eq!(told[11], "line 14: `unplug` takes no value, but `1` follows it; leave it empty");
    assert_eq!(told[12], "line 16: the script ended at line 15; nothing can follow `end`");
    for line in &told {
        assert!(!line.contains('\n') && !line.ends_with('.'), "{line}");
    }
}

/// The names are those of gilrs' own enums: read from the crate, so that a misspelt one cannot pass.
#[test]
fn names_are_gilrs_own() {
    use gilrs::{Axis, Button};
    let axes = [
        Axis::LeftStickX,
        Axis::LeftStickY,
        Axis::LeftZ,
        Axis::RightStickX,
        Axis::RightStickY,
        Axis::RightZ,
        Axis::DPadX,
        Axis::DPadY,
    ];
    assert_eq!(axes.map(|axis| format!("{axis:?}")), script::AXES.map(|(name, _)| name.to_owned()));
    let buttons = [
        Button::South,
        Button::East,
        Button::North,
        Button::West,
        Button::C,
        Button::Z,
        Button::LeftTrigger,
        Button::LeftTrigger2,
        Button::RightTrigger,
        Button::RightTrigger2,
        Button::Select,
        Button::Start,
        Button::Mode,
        Button::LeftThumb,
        Button::RightThumb,
        Button::DPadUp,
        Button::DPadDown,
        Button::DPadLeft,
        Button::DPadRight,
    ];
    assert_eq!(buttons.map(|button| format!("{button:?}")), script::BUTTONS.map(|(name, _)| name.to_owned()));
    for (name, axis) in script::AXES {
        assert_eq!(format!("{axis:?}"), name);
    }
    for (name, button) in script::BUTTONS {
        assert_eq!(format!("{button:?}"), name);
    }
}
