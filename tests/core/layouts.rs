//! The laws in every phase, over random bases: any wheels, gears, links and counts, any history of sticks and buttons.

use core::fmt::Write as _;

use gripline::base::{Layout, Twist, Wheel, analysis};
use gripline::config::{self, Plan};
use gripline::core::Phase;
use gripline::core::io::Buttons;
use proptest::prelude::*;

use crate::world::World;

/// A wheel as the file says it: distance from the middle, bearing, rolling and roller direction, radius, gear.
type Written = (f64, f64, f64, f64, f64, f64, bool);

fn wheels() -> impl Strategy<Value = Vec<Written>> {
    let wheel = (
        0.1..0.4_f64,
        0.0..360.0_f64,
        0.0..360.0_f64,
        -50.0..50.0_f64,
        0.03..0.12_f64,
        0.5..3.0,
        any::<bool>(),
    );
    prop::collection::vec(wheel, 3..=12)
}

fn base() -> impl Strategy<Value = Plan> {
    let limits = (0.3..2.0_f64, 0.3..2.0_f64, 0.5..3.0_f64, 0.5..4.0_f64, 0.0..0.2_f64);
    let rest =
        (1..=2_usize, 500..3000_u32, prop::sample::select(vec!["together", "keep-turn", "keep-travel"]));
    (wheels(), limits, rest, (0.3..0.9_f64, 0.3..0.9_f64)).prop_filter_map(
        "a base that check accepts",
        |(wheels, limits, (links, lsb, saturation), share)| {
            let text = text(&wheels, limits, links, lsb, saturation, share)?;
            config::parse(&text, "random.toml").ok().map(|(plan, _)| plan)
        },
    )
}

fn text(
    wheels: &[Written],
    (up, down, stop, turn, smoothing): (f64, f64, f64, f64, f64),
    links: usize,
    lsb: u32,
    saturation: &str,
    share: (f64, f64),
) -> Option<String> {
    const MAX_RAD_S: f64 = 20.0;
    let plain: Vec<Wheel> = wheels
        .iter()
        .map(|(distance, bearing, drive, roller, radius_m, _, _)| Wheel {
            x_m: distance * bearing.to_radians().cos(),
            y_m: distance * bearing.to_radians().sin(),
            drive_rad: drive.to_radians(),
            roller_rad: roller.to_radians(),
            radius_m: *radius_m,
        })
        .collect();
    if analysis::analyse(&plain).condition > 10.0 {
        return None;
    }
    let layout = Layout::new(&plain).ok()?;
    let least = |gain: &dyn Fn(&[f64; 3]) -> f64| {
        layout.rows().iter().map(|row| MAX_RAD_S / gain(row)).fold(f64::INFINITY, f64::min)
    };
    let travel_m_s = least(&|row| row[1].hypot(row[2])) * share.0;
    let turn_rad_s = (least(&|row| row[0].abs()) * share.1).min(4.0);
    let grip_m_s2 = (travel_m_s * turn_rad_s / 2.0).clamp(0.3, 3.0);
    let mut text = String::from("[base]\nname = \"random\"\noutline_m = [1.0, 1.0]\n");
    for (index, (distance, bearing, drive, roller, radius, gear, reversed)) in wheels.iter().enumerate() {
        let (x, y) = (distance * bearing.to_radians().cos(), distance * bearing.to_radians().sin());
        writeln!(
            text,
            "[[wheel]]\nname = \"w{index}\"\nat_m = [{x:.17}, {y:.17}]\ndrive_deg = {drive:.17}\n\
             roller_deg = {roller:.17}\nradius_m = {radius:.17}\nmax_rad_s = {MAX_RAD_S:.1}\nmax_rad_s2 = 400.0\n\
             link = \"l{}\"\nchannel = {}\nreversed = {reversed}\ngear = {gear:.17}",
            index % links,
            index / links,
        )
        .ok()?;
    }
    for link in 0..links {
        let channels = (wheels.len() - link).div_ceil(links);
        writeln!(
            text,
            "[[link]]\nname = \"l{link}\"\nport = \"/dev/none{link}\"\nbaud = 460800\nexpect = \"l{link}\"\n\
             channels = {channels}\nspeed_lsb_urad_s = {lsb}\nangle_lsb_urad = 300",
        )
        .ok()?;
    }
    writeln!(
        text,
        "[[pace]]\nname = \"slow\"\ntravel_m_s = {:.6}\nturn_rad_s = {:.6}\n\
         [[pace]]\nname = \"fast\"\ntravel_m_s = {travel_m_s:.6}\nturn_rad_s = {turn_rad_s:.6}\n\
         [limits]\nspeed_up_m_s2 = {up:.6}\nslow_down_m_s2 = {down:.6}\nstop_m_s2 = {stop:.6}\n\
         turn_rad_s2 = {turn:.6}\ngrip_m_s2 = {grip_m_s2:.6}\nsmoothing_s = {smoothing:.3}\n\
         saturation = \"{saturation}\"",
        travel_m_s * 0.5,
        turn_rad_s * 0.5,
    )
    .ok()?;
    Some(text)
}

#[derive(Clone, Debug)]
enum Act {
    Sticks(f64, f64, f64),
    Hold(bool),
    Tap(Buttons),
    Reset,
}

fn acts() -> impl Strategy<Value = Vec<(Act, usize)>> {
    let taps = vec![
        Buttons::STOP,
        Buttons::READY,
        Buttons::PACE_UP,
        Buttons::PACE_DOWN,
        Buttons::FRAME,
        Buttons::ZERO_HEADING,
    ];
    let act = prop_oneof![
        6 => (-1.0..1.0_f64, -1.0..1.0_f64, -1.0..1.0_f64).prop_map(|(x, y, turn)| Act::Sticks(x, y, turn)),
        1 => any::<bool>().prop_map(Act::Hold),
        4 => prop::sample::select(taps).prop_map(Act::Tap),
        1 => Just(Act::Reset),
    ];
    prop::collection::vec((act, 1..60_usize), 1..20)
}

/// Hand on the control again after whatever stopped the base.
fn drive_again(world: &mut World) {
    world.sticks(0.0, 0.0, 0.0);
    world.hold(0.0);
    world.run_s(1.0);
    if world.phase() == Phase::Tripped {
        world.reset();
    }
    if world.phase() == Phase::Parked {
        world.tap(Buttons::READY);
    }
    world.ticks(2);
    world.hold(1.0);
    world.tick();
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(256))]

    /// `World::tick` holds every tick against the promises: what is sent lies within half a count a wheel of the range
    /// of the layout matrix, wheels turn only in Driving and Stopping, speeds and accelerations keep their limits.
    #[test]
    fn no_phase_of_any_base_breaks_the_laws(plan in base(), history in acts()) {
        let most: Vec<(f64, f64)> = plan.wheels.iter().map(|it| (it.max_rad_s, it.max_rad_s2)).collect();
        let period_s = plan.tick.period_s();
        let mut world = World::new(plan).into_driving();
        let mut before = world.plan.layout.wheel_speeds(world.out.view.sent);
        world.sticks(0.7, 0.3, 0.5);
        world.ticks(3);
        prop_assert!(world.out.view.sent != Twist::ZERO, "it does not even start");
        for (act, ticks) in history {
            match act {
                Act::Sticks(x, y, turn) => {
                    if !matches!(world.phase(), Phase::Driving) {
                        drive_again(&mut world);
                        before = world.plan.layout.wheel_speeds(world.out.view.sent);
                    }
                    world.sticks(x, y, turn);
                }
                Act::Hold(held) => world.hold(f64::from(u8::from(held))),
                Act::Tap(button) => {
                    world.press(button);
                    world.let_go(button);
                }
                Act::Reset => {
                    world.reset();
                    before = world.plan.layout.wheel_speeds(world.out.view.sent);
                }
            }
            for _ in 0..ticks {
                world.tick();
                let now = world.plan.layout.wheel_speeds(world.out.view.sent);
                // From a trip on the drivers make the ramp.
                let ours = world.phase() != Phase::Tripped;
                for ((now, before), (speed, acceleration)) in now.iter().zip(&before).zip(&most) {
                    prop_assert!(now.abs() <= speed * 1.000_000_001, "{now} rad/s of {speed}");
                    let change = (now - before).abs() / period_s;
                    prop_assert!(!ours || change <= acceleration * 1.000_001, "{change} rad/s2 of {acceleration}");
                }
                before = now;
            }
        }
    }
}
