//! `gripline check` as people run it: its JSON against kinematics worked out elsewhere, its tables and picture, and its
//! exit statuses for what cannot be read.
//!
//! `reference/values.json` holds layout matrices, pseudo-inverses, null spaces and reachable sets computed with numpy
//! and scipy, or in closed form from the literature (the source stands in each entry).
#![expect(clippy::unwrap_used, clippy::panic, reason = "a test says what went wrong by stopping")]

use std::path::{Path, PathBuf};
use std::process::{Command, Output};

use serde_json::Value;

const REFERENCE: &str = include_str!("reference/values.json");

fn check(arguments: &[&str]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_gripline")).arg("check").args(arguments).output().unwrap()
}

fn shipped(name: &str) -> String {
    format!("{}/config/{name}.toml", env!("CARGO_MANIFEST_DIR"))
}

fn json(path: &Path) -> (Option<i32>, Value) {
    let out = check(&[path.to_str().unwrap(), "--json"]);
    let text = String::from_utf8(out.stdout).unwrap();
    let value = serde_json::from_str(&text)
        .unwrap_or_else(|_| panic!("{text}\n{}", String::from_utf8_lossy(&out.stderr)));
    (out.status.code(), value)
}

/// The entries whose identity begins so and that expect such a value.
fn entries(prefixes: &[&str], expected: &str) -> Vec<Value> {
    let all: Value = serde_json::from_str(REFERENCE).unwrap();
    let fits = |it: &&Value| {
        let id = it["id"].as_str().unwrap();
        prefixes.iter().any(|prefix| id.starts_with(prefix)) && it["expected"].get(expected).is_some()
    };
    let some: Vec<Value> = all["entries"].as_array().unwrap().iter().filter(fits).cloned().collect();
    assert!(!some.is_empty(), "no entry with {expected}");
    some
}

/// A configuration of the wheels of an entry, slow enough for any of them.
fn configured(entry: &Value, dir: &Path) -> PathBuf {
    let mut text = String::from("[base]\nname = \"reference\"\noutline_m = [2.0, 2.0]\n");
    let wheels = entry["inputs"]["wheels"].as_array().unwrap();
    for (channel, wheel) in wheels.iter().enumerate() {
        let number = |key: &str| wheel[key].as_f64().unwrap();
        let drive_deg =
            if number("beta_deg") > 360.0 { number("beta_deg") - 360.0 } else { number("beta_deg") };
        text += &format!(
            "[[wheel]]\nname = \"w{channel}\"\nat_m = [{:?}, {:?}]\ndrive_deg = {drive_deg:?}\nroller_deg = {:?}\n\
             radius_m = {:?}\nmax_rad_s = {:?}\nmax_rad_s2 = 1000.0\nlink = \"line\"\nchannel = {channel}\n",
            number("x"),
            number("y"),
            number("gamma_deg"),
            number("r"),
            entry["inputs"]["u_max"].as_f64().unwrap_or(20.0)
        );
    }
    text += &format!(
        "[[link]]\nname = \"line\"\nport = \"/dev/null\"\nbaud = 1000000\nexpect = \"x\"\nchannels = {}\n\
         speed_lsb_urad_s = 1000\nangle_lsb_urad = 500\n[[pace]]\nname = \"only\"\ntravel_m_s = 0.04\nturn_rad_s = 0.1\n",
        wheels.len()
    );
    let path = dir.join("reference.toml");
    std::fs::write(&path, text).unwrap();
    path
}

/// Reachable sets without turning.
fn w00(expected: &str) -> Vec<Value> {
    entries(&["reach-"], expected).into_iter().filter(|it| it["inputs"]["omega"] == 0.0).collect()
}

fn numbers(value: &Value) -> Vec<f64> {
    match value.as_array() {
        Some(all) => all.iter().flat_map(numbers).collect(),
        None => vec![value.as_f64().unwrap()],
    }
}

fn near(about: &str, got: &Value, expected: &Value, tolerance: f64) {
    let (got, expected) = (numbers(got), numbers(expected));
    assert_eq!(got.len(), expected.len(), "{about}");
    let size = expected.iter().fold(1.0_f64, |most, it| most.max(it.abs()));
    for (got, expected) in got.iter().zip(&expected) {
        assert!((got - expected).abs() <= tolerance * size, "{about}: {got} is not {expected}");
    }
}

#[test]
fn layout_and_forward_map_are_those_of_the_reference() {
    let dir = tempfile::tempdir().unwrap();
    for entry in entries(&["kin-closed", "kin-rand", "kin-deficient"], "H") {
        let (about, expected) = (entry["id"].as_str().unwrap(), &entry["expected"]);
        let (status, got) = json(&configured(&entry, dir.path()));
        near(about, &got["layout"], &expected["H"], 1e-12);
        let rows: Vec<Value> = got["wheels"].as_array().unwrap().iter().map(|it| it["row"].clone()).collect();
        assert_eq!(Value::Array(rows), got["layout"], "{about}");
        assert_eq!(got["rank"], expected["rank"], "{about}");
        if expected["rank"] != 3 {
            assert_eq!(status, Some(2), "{about}: refused");
            assert!(got["condition"].is_null(), "{about}");
            let told = got["warnings"][0].as_str().unwrap();
            assert!(told.contains("turns no wheel"), "{about}: {told}");
            continue;
        }
        assert_eq!(status, Some(0), "{about}");
        if let Some(pinv) = expected.get("pinv") {
            near(about, &got["forward"], pinv, 1e-12);
        }
        let values = numbers(&got["singular_values"]);
        assert!(
            (values[0] / values[2] - got["condition"].as_f64().unwrap()).abs()
                < 1e-12 * values[0] / values[2]
        );
        if let Some(projector) = expected.get("left_null_projector") {
            // Any orthonormal basis of the null space gives the one projector N N^T.
            let basis: Vec<Vec<f64>> = got["skid_basis"].as_array().unwrap().iter().map(numbers).collect();
            let made: Vec<Value> = basis
                .iter()
                .flat_map(|a| basis.iter().map(move |b| a.iter().zip(b).map(|(a, b)| a * b).sum::<f64>()))
                .map(|it| serde_json::json!(it))
                .collect();
            near(about, &Value::Array(made), projector, 1e-12);
        }
    }
}

#[test]
fn reach_is_that_of_the_reference() {
    let dir = tempfile::tempdir().unwrap();
    let at = |got: &Value, direction_deg: f64| {
        let all = got["reach"].as_array().unwrap();
        let found =
            all.iter().find(|it| (it["direction_deg"].as_f64().unwrap() - direction_deg).abs() < 1e-6);
        found.map(|it| it["travel_m_s"].as_f64().unwrap())
    };
    for entry in w00("corners") {
        let (_, got) = json(&configured(&entry, dir.path()));
        let corners = entry["expected"]["corners"].as_array().unwrap();
        for corner in corners {
            let [x, y] = numbers(corner)[..] else { panic!("{corner}") };
            let speed = at(&got, y.atan2(x).to_degrees().rem_euclid(360.0)).unwrap();
            assert!((speed - x.hypot(y)).abs() < 1e-8, "{}: {speed} {corner}", entry["id"]);
        }
        let directions =
            numbers(&got["reach"].as_array().unwrap().iter().map(|it| it["direction_deg"].clone()).collect());
        assert!(directions.windows(2).all(|it| it[0] < it[1]) && directions[0] == 0.0);
        let even = directions.iter().filter(|it| it.rem_euclid(5.0) == 0.0).count();
        assert!(even == 72 && directions.len() <= 72 + corners.len());
    }
    for entry in w00("rows") {
        let (_, got) = json(&configured(&entry, dir.path()));
        let mut compared = 0;
        for row in entry["expected"]["rows"].as_array().unwrap() {
            let [direction_deg, along, ..] = numbers(row)[..] else { panic!("{row}") };
            if let Some(speed) = at(&got, direction_deg) {
                assert!((speed - along).abs() < 1e-8, "{}: {speed} {row}", entry["id"]);
                compared += 1;
            }
        }
        assert!(compared >= 10, "{}", entry["id"]);
        // The room's frame has the inradius of the polygon: the least over all directions.
        let least =
            numbers(&got["reach"].as_array().unwrap().iter().map(|it| it["travel_m_s"].clone()).collect())
                .into_iter()
                .fold(f64::INFINITY, f64::min);
        let room = got["room_travel_m_s"].as_f64().unwrap();
        assert!(room <= least + 1e-12 && room > 0.99 * least, "{}: {room} {least}", entry["id"]);
    }
    for entry in entries(&["reach-"], "omega_max_v0") {
        let (_, got) = json(&configured(&entry, dir.path()));
        near("turn", &got["turn_rad_s"], &entry["expected"]["omega_max_v0"], 1e-8);
    }
}

#[test]
fn json_has_the_keys_that_are_promised_and_no_other() {
    let (status, got) = json(Path::new(&shipped("four-omni")));
    assert_eq!(status, Some(0));
    let keys =
        |it: &Value| it.as_object().unwrap().keys().cloned().collect::<std::collections::BTreeSet<_>>();
    let names = |it: &str| it.split(", ").map(str::to_owned).collect::<std::collections::BTreeSet<_>>();
    assert_eq!(
        keys(&got),
        names(
            "wheels, layout, rank, singular_values, condition, forward, skid_basis, reach, turn_rad_s, room_travel_m_s, links, stop_budget, warnings"
        )
    );
    assert_eq!(keys(&got["wheels"][0]), names("row"));
    assert_eq!(keys(&got["reach"][0]), names("direction_deg, travel_m_s"));
    assert_eq!(keys(&got["links"][0]), names("name, to_drivers_load, from_drivers_load"));
    assert_eq!(
        keys(&got["stop_budget"][0]),
        names(
            "guard, pace, detect_s, tick_s, smoothing_s, wire_s, driver_s, ramp_s, total_s, distance_m, person_m"
        )
    );
    let (wheels, forward) = (got["layout"].as_array().unwrap(), got["forward"].as_array().unwrap());
    assert_eq!((wheels.len(), forward.len()), (4, 3));
    assert!(wheels.iter().all(|it| it.as_array().unwrap().len() == 3));
    assert!(forward.iter().all(|it| it.as_array().unwrap().len() == 4));
    assert!(got["skid_basis"].as_array().unwrap().iter().all(|it| it.as_array().unwrap().len() == 1));
    // 14 bytes and 2 a channel to the drivers, 26 and 6 a channel from them, COBS and end mark included; ten bits each.
    let link = &got["links"][0];
    near("load", &link["to_drivers_load"], &serde_json::json!(18.0 * 10.0 * 200.0 / 460_800.0), 1e-12);
    near("load", &link["from_drivers_load"], &serde_json::json!(38.0 * 10.0 * 200.0 / 460_800.0), 1e-12);
    let guards = |pace: &str| {
        let rows = got["stop_budget"].as_array().unwrap().iter();
        rows.filter(|it| it["pace"] == pace)
            .map(|it| it["guard"].as_str().unwrap().to_owned())
            .collect::<Vec<_>>()
    };
    assert_eq!(guards("creep"), guards("stride"));
    assert!(guards("walk").contains(&"host silent".to_owned()) && guards("walk").len() == 16);
}

#[test]
fn what_is_unknown_is_null_and_warned_of() {
    let dir = tempfile::tempdir().unwrap();
    let text = std::fs::read_to_string(shipped("four-mecanum")).unwrap();
    let path = dir.path().join("cart.toml");
    std::fs::write(
        &path,
        text.replace("coast_m_s2", "# coast_m_s2").replace("clear_m = 3.0", "clear_m = 0.5"),
    )
    .unwrap();
    let (status, got) = json(&path);
    assert_eq!(status, Some(0));
    let runaway = got["stop_budget"].as_array().unwrap().iter().find(|it| it["guard"] == "runaway").unwrap();
    for key in ["ramp_s", "total_s", "distance_m", "person_m"] {
        assert!(runaway[key].is_null(), "{runaway}");
    }
    let told = got["warnings"].to_string();
    assert!(told.contains("coast_m_s2") && told.contains("does not bear pace \\\"walk\\\""), "{told}");
    let text = String::from_utf8(check(&[path.to_str().unwrap()]).stdout).unwrap();
    assert!(text.contains("NOT enough") && text.contains("unknown"), "{text}");
}

#[test]
fn the_tables_and_the_picture_tell_what_there_is() {
    let dir = tempfile::tempdir().unwrap();
    let svg = dir.path().join("base.svg");
    for name in ["three-omni", "four-mecanum", "four-omni"] {
        let out = check(&[&shipped(name), "--picture", svg.to_str().unwrap()]);
        assert_eq!(out.status.code(), Some(0));
        let text = String::from_utf8(out.stdout).unwrap();
        for words in [
            "Layout matrix",
            "rank 3 of 3",
            "Forward map",
            "Reach",
            "Load of the lines",
            "host silent",
            "ISO 13855",
        ] {
            assert!(text.contains(words), "{name}: {words} is not in\n{text}");
        }
        let picture = std::fs::read_to_string(&svg).unwrap();
        assert!(picture.starts_with("<svg ") && picture.ends_with("</svg>\n"));
        assert!(!picture.contains("NaN") && !picture.contains("inf"));
        let plan = gripline::config::load(Path::new(&shipped(name))).unwrap().0;
        for words in plan.wheels.iter().map(|it| &it.name).chain(plan.paces.iter().map(|it| &it.name)) {
            assert!(picture.contains(words.as_str()), "{name}: {words} is not in the picture");
        }
    }
}

#[test]
fn names_cannot_break_the_picture() {
    let dir = tempfile::tempdir().unwrap();
    let text = std::fs::read_to_string(shipped("four-mecanum")).unwrap();
    let (path, svg) = (dir.path().join("cart.toml"), dir.path().join("cart.svg"));
    std::fs::write(&path, text.replace("\"front left\"", "\"<b>&\"").replace("\"walk\"", "'\"</svg>'"))
        .unwrap();
    assert_eq!(check(&[path.to_str().unwrap(), "--picture", svg.to_str().unwrap()]).status.code(), Some(0));
    let picture = std::fs::read_to_string(&svg).unwrap();
    assert!(picture.contains("&lt;b&gt;&amp;") && !picture.contains("<b>"));
    assert_eq!(picture.matches("</svg>").count(), picture.matches("<svg ").count());
}

#[test]
fn keys_need_no_configuration() {
    let out = check(&["--keys"]);
    assert_eq!(
        (out.status.code(), String::from_utf8(out.stdout).unwrap()),
        (Some(0), gripline::config::keys::reference())
    );
}

#[test]
fn what_cannot_be_read_is_told_in_one_line_with_status_2() {
    let dir = tempfile::tempdir().unwrap();
    let bytes = dir.path().join("bytes.toml");
    std::fs::write(&bytes, [0xff, 0xfe, 0x00]).unwrap();
    let missing = dir.path().join("missing.toml");
    for (arguments, words) in [
        (vec![missing.to_str().unwrap()], "missing.toml"),
        (vec![dir.path().to_str().unwrap()], "cannot read"),
        (vec![bytes.to_str().unwrap()], "bytes.toml"),
        (vec![], "required"),
        (vec!["--nonsense"], "--nonsense"),
    ] {
        let out = check(&arguments);
        let told = String::from_utf8(out.stderr).unwrap();
        assert_eq!(out.status.code(), Some(2), "{arguments:?}: {told}");
        assert!(told.starts_with("gripline: ") && told.contains(words) && told.contains("; "), "{told}");
        assert_eq!(told.lines().count(), 1, "{told}");
        assert!(out.stdout.is_empty());
    }
}

#[test]
fn every_mistake_of_a_refused_file_is_told_with_status_2() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("cart.toml");
    let text = std::fs::read_to_string(shipped("four-mecanum")).unwrap();
    std::fs::write(&path, text.replacen("radius_m = 0.05", "radius_m = 0", 1).replace("clear_m", "claer_m"))
        .unwrap();
    let out = check(&[path.to_str().unwrap(), "--json"]);
    let told = String::from_utf8(out.stderr).unwrap();
    assert_eq!(out.status.code(), Some(2), "{told}");
    assert!(told.starts_with("gripline: 2 mistakes in "), "{told}");
    assert!(told.contains("`radius_m` cannot be 0") && told.contains("did you mean `clear_m`?"), "{told}");
    assert_eq!(told.matches('^').count(), "0".len() + "claer_m".len(), "{told}");
    assert!(out.stdout.is_empty());
}

#[test]
fn a_picture_that_cannot_be_written_is_told_with_status_3() {
    let out = check(&[&shipped("three-omni"), "--picture", "/nowhere/at/all.svg"]);
    let told = String::from_utf8(out.stderr).unwrap();
    assert_eq!(out.status.code(), Some(3), "{told}");
    assert!(told.contains("/nowhere/at/all.svg") && told.lines().count() == 1, "{told}");
}
