//! The table of keys, printed.

use super::keys::{AXES, BUTTONS, KEYS, Kind, TABLES, header};

/// The configuration reference: every key with unit, range, default and help.
#[must_use]
pub fn reference() -> String {
    let mut text = String::from("# Every key of a configuration. Keys without a default must be given.\n");
    for (table, _, help) in TABLES {
        text += &format!("\n{}  # {help}\n", header(table));
        for key in KEYS.iter().filter(|it| it.table == *table) {
            let default = match (key.default, key.kind) {
                (None, _) => "must be given".into(),
                (Some(""), Kind::Text(_)) => "default \"\"".into(),
                (Some(""), _) => "may be left out".into(),
                (Some(it), Kind::Word(_) | Kind::Button | Kind::Axis) => format!("default \"{it}\""),
                (Some(it), _) => format!("default {it}"),
            };
            let unit = if key.unit.is_empty() { String::new() } else { format!(" {}", key.unit) };
            text += &format!(
                "  {:<20} {}{unit}; {default}\n  {:<20}   {}\n",
                key.name,
                key.kind.range(),
                "",
                key.help
            );
        }
    }
    text += &format!("\nButtons: {}\nAxes: {}\n", BUTTONS.join(", "), AXES.join(", "));
    text
}
