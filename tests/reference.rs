//! The mathematics and the codes against values from outside the project: `tests/reference/values.json`, each entry with
//! its source (numpy, scipy, the PyPI package cobs, RFC 3720, handbook forms).
#![expect(clippy::unwrap_used, reason = "a test says what went wrong by stopping")]

use gripline::base::analysis::analyse;
use gripline::base::reach::Reach;
use gripline::base::{Layout, PerWheel, Pose, Twist, Wheel, pose};
use gripline::units::rad;
use gripline::wire::Deframer;
use serde_json::Value;

fn entries(prefix: &str) -> Vec<Value> {
    let text = include_str!("reference/values.json");
    let all: Value = serde_json::from_str(text).unwrap();
    let found: Vec<Value> = all["entries"]
        .as_array()
        .unwrap()
        .iter()
        .filter(|it| it["id"].as_str().unwrap().starts_with(prefix))
        .cloned()
        .collect();
    assert!(!found.is_empty(), "no entry {prefix}");
    found
}

fn wheels(entry: &Value) -> Vec<Wheel> {
    let number = |it: &Value, key: &str| it[key].as_f64().unwrap();
    entry["inputs"]["wheels"]
        .as_array()
        .unwrap()
        .iter()
        .map(|it| Wheel {
            x_m: number(it, "x"),
            y_m: number(it, "y"),
            drive_rad: rad(number(it, "beta_deg")),
            roller_rad: rad(number(it, "gamma_deg")),
            radius_m: number(it, "r"),
        })
        .collect()
}

fn numbers(value: &Value) -> Vec<f64> {
    value.as_array().unwrap().iter().map(|it| it.as_f64().unwrap()).collect()
}

fn matrix(value: &Value) -> Vec<Vec<f64>> {
    value.as_array().unwrap().iter().map(numbers).collect()
}

fn close(got: f64, expected: f64, scale: f64, what: &str) {
    assert!((got - expected).abs() <= 1e-9 * scale.max(1.0), "{what}: got {got}, expected {expected}");
}

#[test]
fn layout_rank_pseudo_inverse_and_skid_space_are_those_of_numpy() {
    let mut deficient = 0;
    for entry in entries("kin-").into_iter().filter(|it| it["expected"]["H"].is_array()) {
        let id = entry["id"].as_str().unwrap();
        let wheels = wheels(&entry);
        let analysis = analyse(&wheels);
        for (row, expected) in analysis.h.iter().zip(matrix(&entry["expected"]["H"])) {
            let scale = expected.iter().fold(0.0_f64, |a, b| a.max(b.abs()));
            row.iter().zip(expected).for_each(|(got, expected)| close(*got, expected, scale, id));
        }
        // Those within 1e-9 of losing a rank are called deficient here: no base is measured that well.
        let nearly = entry["expected"]["cond_nonzero"].as_f64().is_some_and(|it| it > 1e8);
        if nearly {
            continue;
        }
        assert_eq!(analysis.rank as u64, entry["expected"]["rank"].as_u64().unwrap(), "{id}");
        if analysis.rank < 3 {
            deficient += 1;
            assert!(Layout::new(&wheels).is_err() && !analysis.impossible.is_empty(), "{id}");
            continue;
        }
        let layout = Layout::new(&wheels).unwrap();
        let condition = analysis.condition;
        // Entries of nearly deficient layouts give no pseudo-inverse.
        if entry["expected"]["pinv"].is_array() {
            for (got, expected) in analysis.forward.iter().zip(matrix(&entry["expected"]["pinv"])) {
                got.iter().zip(&expected).for_each(|(got, expected)| close(*got, *expected, condition, id));
            }
        }
        if let Some(projector) = entry["expected"]["left_null_projector"].as_array() {
            for (index, row) in projector.iter().enumerate() {
                let unit: PerWheel<f64> =
                    (0..wheels.len()).map(|it| if it == index { 1.0 } else { 0.0 }).collect();
                let from_basis: Vec<f64> = (0..wheels.len())
                    .map(|j| {
                        analysis.skid_basis[index]
                            .iter()
                            .zip(&analysis.skid_basis[j])
                            .map(|(a, b)| a * b)
                            .sum()
                    })
                    .collect();
                for ((got, basis), expected) in layout.skid(&unit).iter().zip(from_basis).zip(numbers(row)) {
                    close(*got, expected, condition, id);
                    close(basis, expected, condition, id);
                }
            }
        }
        if let (Some(twist), Some(u)) =
            (entry["inputs"]["twist"].as_array(), entry["expected"]["u"].as_array())
        {
            let [turn, x, y] = [0, 1, 2].map(|it| twist[it].as_f64().unwrap());
            for (got, expected) in layout.wheel_speeds(Twist::new(turn, x, y)).iter().zip(u) {
                close(*got, expected.as_f64().unwrap(), 100.0, id);
            }
        }
    }
    assert!(deficient > 3, "the deficient layouts are gone");
}

#[test]
fn poses_are_those_of_the_matrix_exponential() {
    for entry in entries("se2-exp-") {
        let [turn, x, y] = [0, 1, 2].map(|it| entry["inputs"]["twist"][it].as_f64().unwrap());
        let dt = entry["inputs"]["dt"].as_f64().unwrap();
        let got = pose::exp(Twist::new(turn, x, y), dt);
        let expected = ["dx", "dy", "dtheta"].map(|key| entry["expected"][key].as_f64().unwrap());
        for (got, expected) in [got.x_m, got.y_m, got.heading_rad].into_iter().zip(expected) {
            close(got, expected, 1.0, entry["id"].as_str().unwrap());
        }
        if got.heading_rad.abs() < 3.0 {
            let back = pose::log(got, dt);
            for (got, expected) in [back.turn_rad_s, back.x_m_s, back.y_m_s].into_iter().zip([turn, x, y]) {
                close(got, expected, 10.0, "log of exp");
            }
        }
    }
    for entry in entries("se2-path-") {
        let [x_m, y_m, heading_rad] = [0, 1, 2].map(|it| entry["inputs"]["pose0"][it].as_f64().unwrap());
        let mut at = Pose { x_m, y_m, heading_rad };
        for step in matrix(&entry["inputs"]["steps"]) {
            at = at.then(pose::exp(Twist::new(step[0], step[1], step[2]), step[3]));
        }
        let id = entry["id"].as_str().unwrap();
        close(at.x_m, entry["expected"]["x"].as_f64().unwrap(), 10.0, id);
        close(at.y_m, entry["expected"]["y"].as_f64().unwrap(), 10.0, id);
        close(at.heading_rad, entry["expected"]["theta_unwrapped"].as_f64().unwrap(), 10.0, id);
    }
}

#[test]
fn reach_is_that_of_a_linear_programme() {
    for entry in entries("reach-") {
        let id = entry["id"].as_str().unwrap();
        let wheels = wheels(&entry);
        let max: PerWheel<f64> = wheels.iter().map(|_| entry["inputs"]["u_max"].as_f64().unwrap()).collect();
        let reach = Reach::new(&Layout::new(&wheels).unwrap(), &max);
        if let Some(turn) = entry["expected"]["omega_max_v0"].as_f64() {
            close(reach.turn_rad_s(), turn, 1.0, id);
        }
        // Corners at a turn are a planning aid that is not offered; those at rest in turn are.
        let at_rest = entry["inputs"]["omega"].as_f64().is_some_and(|it| it.abs() < 1e-12);
        if at_rest && entry["expected"]["corners"].is_array() {
            let corners = matrix(&entry["expected"]["corners"]);
            assert_eq!(reach.corners().len(), corners.len(), "{id}");
            for corner in corners {
                let near =
                    reach.corners().iter().any(|it| (it[0] - corner[0]).hypot(it[1] - corner[1]) < 1e-9);
                assert!(near, "{id}: no corner {corner:?} in {:?}", reach.corners());
            }
        }
    }
}

#[test]
fn twists_from_wheels_and_residuals_are_those_of_least_squares() {
    for entry in entries("odo-").into_iter().filter(|it| it["inputs"]["u"].is_array()) {
        let id = entry["id"].as_str().unwrap();
        let layout = Layout::new(&wheels(&entry)).unwrap();
        let u: PerWheel<f64> = numbers(&entry["inputs"]["u"]).into_iter().collect();
        let got = layout.twist(&u);
        for (got, expected) in
            [got.turn_rad_s, got.x_m_s, got.y_m_s].into_iter().zip(numbers(&entry["expected"]["V"]))
        {
            close(got, expected, 10.0, id);
        }
        for (got, expected) in layout.skid(&u).iter().zip(numbers(&entry["expected"]["residual"])) {
            close(*got, expected, 10.0, id);
        }
    }
}

fn bytes(hex: &str) -> Vec<u8> {
    (0..hex.len() / 2).map(|it| u8::from_str_radix(&hex[2 * it..2 * it + 2], 16).unwrap()).collect()
}

#[test]
fn the_line_decodes_what_the_papers_and_the_cobs_package_encode() {
    let mut tried = 0;
    for entry in ["cobs-table", "cobs-paper", "cobs-rand"].into_iter().flat_map(entries) {
        let (raw, encoded) = (&entry["inputs"]["raw_hex"], &entry["expected"]["encoded_hex"]);
        let (Some(raw), Some(encoded)) = (raw.as_str().map(bytes), encoded.as_str().map(bytes)) else {
            continue;
        };
        if raw.len() > 200 || raw.is_empty() {
            continue;
        }
        let mut deframer = Deframer::new();
        encoded.iter().for_each(|byte| assert!(deframer.push(*byte).is_none()));
        assert_eq!(deframer.push(0), Some(Ok(&raw[..])), "{}", entry["id"]);
        tried += 1;
    }
    assert!(tried > 15, "only {tried} codings were tried");
}

#[test]
fn the_checksum_is_that_of_the_internet_standard() {
    // RFC 3720, appendix B.4, patterns of CRC-32C.
    let crc = crc::Crc::<u32>::new(&crc::CRC_32_ISCSI);
    for entry in entries("crc-rfc3720") {
        let message = bytes(entry["inputs"]["message_hex"].as_str().unwrap());
        let got = format!("{:08x}", crc.checksum(&message));
        let expected = entry["expected"]["crc_hex"].as_str().unwrap();
        // The standard prints the bytes in the order in which they are sent: low byte first.
        let swapped = format!("{:08x}", crc.checksum(&message).swap_bytes());
        assert!(got == expected || swapped == expected, "{}: {got}", entry["id"]);
    }
}
