//! Random bases, as the text of a configuration: whatever is driven here has passed the parser and its checks.

use core::fmt::Write as _;

use gripline::base::{Layout, Wheel, analysis};
use gripline::config::{self, Plan};
use gripline::core::budget::{BudgetRow, budget};
use gripline::standin::sim::SimSettings;

use crate::chance::Chance;

/// Ticks a second of every base here.
const RATE_HZ: f64 = 100.0;
/// How finely the base is simulated: two stretches a tick.
pub(crate) const STRETCH_NS: u64 = 5_000_000;

/// A base, what its drivers are like, and its stop budget.
pub(crate) struct Base {
    pub(crate) plan: Plan,
    pub(crate) rows: Vec<BudgetRow>,
    pub(crate) sim: SimSettings,
}

/// Draws bases until one of them passes the checks; most do.
pub(crate) fn random(seed: u64) -> Base {
    let mut chance = Chance::new(seed, 1);
    for _ in 0..1000 {
        let Some((text, sim)) = draw(&mut chance) else { continue };
        if let Ok((plan, _)) = config::parse(&text, "random.toml") {
            let rows = budget(&plan);
            return Base { plan, rows, sim };
        }
    }
    panic!("base {seed}: a thousand draws and none passes the checks");
}

/// Distance and bearing of a wheel, where it rolls and where its rollers point, all in degrees and metres.
struct Drawn {
    x_m: f64,
    y_m: f64,
    drive_deg: f64,
    roller_deg: f64,
    radius_m: f64,
    max_rad_s: f64,
    gear: f64,
    reversed: bool,
}

fn wheels(chance: &mut Chance) -> Vec<Drawn> {
    let style = chance.below(3);
    let n = if style == 1 { 2 * (2 + chance.below(5)) } else { 3 + chance.below(10) };
    let (radius_m, max_rad_s) = (chance.within(0.03, 0.1), chance.within(10.0, 30.0));
    let ring_m = chance.within(0.15, 0.45);
    (0..n)
        .map(|i| {
            let bearing = 360.0 * i as f64 / n as f64;
            let (x_m, y_m, drive_deg, roller_deg) = match style {
                // Omni wheels on a ring.
                0 => {
                    let at = bearing.to_radians();
                    (ring_m * at.cos(), ring_m * at.sin(), bearing + 90.0, 0.0)
                }
                // Mecanum wheels in two rows.
                1 => {
                    let (side, row) = (if i % 2 == 0 { 1.0 } else { -1.0 }, (i / 2) as f64);
                    let x_m = ring_m * (1.0 - 2.0 * row / (n as f64 / 2.0 - 1.0));
                    let lean = if (i / 2) % 2 == 0 { -45.0 } else { 45.0 };
                    (x_m, side * ring_m * 0.7, 0.0, side * lean)
                }
                _ => {
                    let at = chance.within(0.0, 360.0).to_radians();
                    let far = chance.within(0.1, 0.45);
                    let (drive, roller) = (chance.within(0.0, 360.0), chance.within(-50.0, 50.0));
                    (far * at.cos(), far * at.sin(), drive, roller)
                }
            };
            Drawn {
                x_m,
                y_m,
                drive_deg,
                roller_deg,
                radius_m: if style == 2 { chance.within(0.03, 0.1) } else { radius_m },
                max_rad_s: if style == 2 { max_rad_s * chance.within(0.8, 1.2) } else { max_rad_s },
                gear: chance.within(0.5, 3.0),
                reversed: chance.one_in(2),
            }
        })
        .collect()
}

fn draw(chance: &mut Chance) -> Option<(String, SimSettings)> {
    let wheels = wheels(chance);
    let geometry: Vec<Wheel> = wheels
        .iter()
        .map(|it| Wheel {
            x_m: it.x_m,
            y_m: it.y_m,
            drive_rad: it.drive_deg.to_radians(),
            roller_rad: it.roller_deg.to_radians(),
            radius_m: it.radius_m,
        })
        .collect();
    if analysis::analyse(&geometry).condition > 10.0 {
        return None;
    }
    let layout = Layout::new(&geometry).ok()?;
    // The fastest pace that all wheels bear in every direction, and a share of it.
    let least = |part: fn(&[f64; 3]) -> f64| {
        let most = layout.rows().iter().zip(&wheels).map(|(row, it)| it.max_rad_s / part(row));
        most.fold(f64::INFINITY, f64::min)
    };
    let travel_m_s = (least(|[_, x, y]| x.hypot(*y)) * chance.within(0.3, 0.95)).min(1.8);
    let turn_rad_s = (least(|[turn, _, _]| turn.abs()) * chance.within(0.3, 0.95)).min(3.5);
    let grip_m_s2 = (travel_m_s * turn_rad_s * chance.within(0.3, 1.2)).clamp(0.3, 3.0);
    let stop_m_s2 = chance.within(0.8, 3.0);
    let turn_rad_s2 = chance.within(1.5, 8.0);
    // What the wheels must bear for all that, and some more.
    let gains = layout.rows().iter().map(|[turn, x, y]| (turn.abs(), x.hypot(*y)));
    let needed = gains.map(|(turn, travel)| (turn * turn_rad_s2).max(travel * stop_m_s2.max(grip_m_s2)));
    let max_rad_s2 = needed.fold(0.0, f64::max) * chance.within(1.02, 3.0);
    let links = 1 + chance.below(3);
    let (lag_ms, dead_ms) = (chance.within(4.0, 30.0), chance.within(0.0, 4.0));
    let coast_m_s2 = chance.within(0.5, 2.0);
    let wired = chance.one_in(3);
    let squeeze = chance.one_in(4);
    let category = usize::from(!chance.one_in(4));
    let paces = 1 + chance.below(3);

    let mut text = String::from("[base]\nname = \"random\"\noutline_m = [1.0, 1.0]\n");
    for (index, it) in wheels.iter().enumerate() {
        let Drawn { x_m, y_m, drive_deg, roller_deg, radius_m, max_rad_s, gear, reversed } = it;
        writeln!(
            text,
            "[[wheel]]\nname = \"w{index}\"\nat_m = [{x_m:.17}, {y_m:.17}]\ndrive_deg = {drive_deg:.17}\n\
             roller_deg = {roller_deg:.17}\nradius_m = {radius_m:.17}\nmax_rad_s = {max_rad_s:.17}\n\
             max_rad_s2 = {max_rad_s2:.17}\nlink = \"l{}\"\nchannel = {}\nreversed = {reversed}\ngear = {gear:.17}",
            index % links,
            index / links,
        )
        .ok()?;
    }
    for link in 0..links {
        let channels = (wheels.len() - link).div_ceil(links) + chance.below(2);
        let fastest = wheels.iter().map(|it| it.max_rad_s * it.gear).fold(0.0, f64::max);
        writeln!(
            text,
            "[[link]]\nname = \"l{link}\"\nport = \"/dev/none{link}\"\nbaud = {}\nexpect = \"l{link}\"\n\
             channels = {channels}\nspeed_lsb_urad_s = {}\nangle_lsb_urad = 300\nvalid_ms = {}\nlatency_ms = {:.1}",
            chance.pick(&[230_400, 460_800, 921_600]),
            (fastest / chance.within(15_000.0, 32_000.0) * 1e6).ceil(),
            60 + chance.below(190),
            chance.within(1.0, 16.0),
        )
        .ok()?;
    }
    for pace in 1..=paces {
        let share = pace as f64 / paces as f64;
        let (travel_m_s, turn_rad_s) = (travel_m_s * share, turn_rad_s * share);
        writeln!(
            text,
            "[[pace]]\nname = \"p{pace}\"\ntravel_m_s = {travel_m_s:.9}\nturn_rad_s = {turn_rad_s:.9}"
        )
        .ok()?;
    }
    writeln!(
        text,
        "[limits]\nspeed_up_m_s2 = {:.6}\nslow_down_m_s2 = {:.6}\nstop_m_s2 = {stop_m_s2:.6}\n\
         turn_rad_s2 = {turn_rad_s2:.6}\ngrip_m_s2 = {grip_m_s2:.6}\nsmoothing_s = {:.3}\nsaturation = \"{}\"",
        stop_m_s2 * chance.within(0.4, 1.0),
        stop_m_s2 * chance.within(0.5, 1.0),
        chance.pick(&[0.0, 0.05, 0.1, 0.2]),
        chance.pick(&["together", "keep-turn", "keep-travel"]),
    )
    .ok()?;
    writeln!(text, "[pad]\nwired = {wired}{}", if squeeze { "\nhold_squeeze = 0.9" } else { "" }).ok()?;
    writeln!(text, "[room]\nheading = \"{}\"", chance.pick(&["wheels", "wheels", "gyro"])).ok()?;
    writeln!(
        text,
        "[guard]\nstop_category = {category}\npad_quiet_stream_ms = {:.1}\npad_quiet_change_ms = {:.1}\n\
         feedback_quiet_ms = {:.1}\nnot_heard_ms = {:.1}\nlate_ms = {:.1}\ndriver_ms = {:.1}\n\
         follow_share = {:.3}\nfollow_s = {:.3}\nslowing_s = {:.3}\nrunaway_share = {:.3}\nrunaway_s = {:.3}\n\
         skid_share = {:.3}\nskid_s = {:.3}\nreset_hold_s = {:.3}\nstop_margin_s = {:.3}",
        chance.within(50.0, 300.0),
        chance.within(150.0, 600.0),
        chance.within(60.0, 250.0),
        chance.within(90.0, 250.0),
        chance.within(15.0, 60.0),
        (lag_ms + dead_ms + 6.0).ceil(),
        chance.within(0.1, 0.25),
        chance.within(0.25, 0.8),
        chance.within(0.1, 0.3),
        chance.within(0.05, 0.15),
        chance.within(0.2, 0.5),
        chance.within(0.1, 0.2),
        chance.within(0.25, 0.8),
        chance.within(0.2, 0.5),
        chance.within(0.3, 0.6),
    )
    .ok()?;
    writeln!(text, "[bay]\ncoast_m_s2 = {coast_m_s2:.6}\n[loop]\nrate_hz = {RATE_HZ:.1}").ok()?;
    writeln!(text, "[console]\nreset = {}", chance.one_in(2)).ok()?;
    let sim = SimSettings {
        lag_s: lag_ms * 1e-3,
        dead_time_s: dead_ms * 1e-3,
        gyro_noise_rad_s: 0.0,
        stretch_ns: STRETCH_NS,
        ..SimSettings::default()
    };
    Some((text, sim))
}
