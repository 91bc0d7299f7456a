//! Each fault does what it says, and `clear` undoes it.

use super::*;
use crate::standin::fault::{Asked, parse};

fn ask(host: &mut Host, line: &str) {
    match parse(line, &host.plan) {
        Ok(Asked::Fault(fault)) => host.sim.fault(fault),
        other => panic!("{line}: {other:?}"),
    }
}

fn frames_from(host: &Host, link: usize) -> usize {
    host.heard.iter().filter(|(_, from, _)| *from == link).count()
}

#[test]
fn mute_drivers_hear_but_say_nothing() {
    let mut host = Host::running(1, SimSettings::default(), AHEAD);
    host.run_ms(100);
    ask(&mut host, "mute rear");
    host.heard.clear();
    host.run_ms(300);
    assert_eq!(frames_from(&host, 1), 0);
    assert_eq!(frames_from(&host, 0), 60);
    close(host.sim.truth().twist.x_m_s, 0.5, 1e-3);
    ask(&mut host, "clear");
    host.run_ms(100);
    assert_eq!(frames_from(&host, 1), 20);
    assert_eq!(host.feedback(1).status & status::LATCHED, 0);
}

#[test]
fn deaf_drivers_speak_but_hear_nothing_and_stop_by_themselves() {
    let mut host = Host::running(1, SimSettings::default(), AHEAD);
    host.run_ms(100);
    ask(&mut host, "deaf front");
    host.heard.clear();
    host.run_ms(1000);
    assert_eq!(frames_from(&host, 0), 50);
    let stopped = host.feedback(0);
    assert_eq!(
        stopped.status & (status::LATCHED | status::WENT_SILENT),
        status::LATCHED | status::WENT_SILENT
    );
    assert_eq!(host.feedback(1).status & status::LATCHED, 0, "the other link goes on");
}

#[test]
fn wheels_without_torque_are_dragged_along_by_those_that_have_it() {
    let mut host = Host::running(1, SimSettings::default(), AHEAD);
    host.run_ms(100);
    ask(&mut host, "deaf front");
    host.run_ms(550); // silent for 100 ms, ramped for 500: the front wheels fight the rear ones
    let fighting = host.sim.truth();
    assert!(fighting.wheel_rad_s[0] < 2.0 && fighting.wheel_rad_s[2] > 9.0, "{fighting:?}");
    host.run_ms(1000);
    let truth = host.sim.truth();
    assert_eq!(host.feedback(0).status & status::TORQUE_ON, 0);
    for (speed, skid) in truth.wheel_rad_s.iter().zip(host.plan.layout.skid(&truth.wheel_rad_s)) {
        close(*speed, 10.0, 0.01);
        close(skid, 0.0, 0.01);
    }
    close(f64::from(host.feedback(0).channels[0].speed) * LSB_RAD_S, 10.0, 0.01);
}

#[test]
fn a_cut_line_carries_nothing_either_way() {
    let mut host = Host::running(1, SimSettings::default(), AHEAD);
    host.run_ms(100);
    ask(&mut host, "cut");
    host.heard.clear();
    host.run_ms(1000);
    assert!(host.heard.is_empty());
    assert_eq!(host.sim.truth().twist, Twist::ZERO);
    ask(&mut host, "sound");
    host.run_ms(100);
    assert_ne!(host.feedback(0).status & status::WENT_SILENT, 0);
}

#[test]
fn a_lossy_line_loses_its_share_of_frames_both_ways() {
    let mut host = Host::running(1, SimSettings::default(), AHEAD);
    host.valid_ms = 1000;
    ask(&mut host, "lossy 0.2 front");
    host.heard.clear();
    host.run_ms(10_000);
    // 2000 Drives, each answered: 0.8 x 0.8 arrive. A silence of 20 ms that is filled otherwise is rare (0.36^4).
    let share = frames_from(&host, 0) as f64 / 2000.0;
    close(share, 0.64, 5.0 * (0.64_f64 * 0.36 / 2000.0).sqrt() + 0.02);
    assert_eq!(frames_from(&host, 1), 2000);
    assert_eq!(host.garbled, 0, "what arrives is whole");
    assert_eq!(host.feedback(0).refused, 0);
}

#[test]
fn a_noisy_line_spoils_frames_and_both_ends_notice() {
    let mut host = Host::running(1, SimSettings::default(), AHEAD);
    ask(&mut host, "noisy 0.0005 rear");
    host.run_ms(5000);
    assert!(host.garbled > 20, "{}", host.garbled);
    let feedback = host.feedback(1);
    assert!(feedback.refused > 20, "{}", feedback.refused);
    assert_eq!(host.feedback(0).refused, 0);
    ask(&mut host, "noisy 0");
    host.run_ms(100);
    let (garbled, refused) = (host.garbled, host.feedback(1).refused);
    host.run_ms(1000);
    assert_eq!((host.garbled, host.feedback(1).refused), (garbled, refused));
}

#[test]
fn slow_drivers_answer_late() {
    let mut host = Host::running(1, SimSettings::default(), AHEAD);
    ask(&mut host, "slow 60");
    host.run_ms(500);
    let behind = host.sequence.wrapping_sub(host.feedback(0).ack);
    assert_eq!(behind, 60 / 5, "a tick every 5 ms");
    assert_eq!(host.feedback(0).status & status::LATCHED, 0);
}

#[test]
fn a_restart_is_a_new_driver_that_knows_nothing() {
    let mut host = Host::running(1, SimSettings::default(), AHEAD);
    host.run_ms(300);
    let (boot, before) = (host.identity(1).boot, host.feedback(1));
    assert!(before.clock_us > 300_000 && before.channels[0].angle.abs() > 1000);
    ask(&mut host, "restart rear");
    host.run_ms(21);
    let after = host.feedback(1);
    assert_ne!(after.boot, boot);
    assert!(after.clock_us < 22_000);
    assert!(after.channels[0].angle.abs() < 1000);
    assert_ne!(after.status & status::OUT_OF_ORDER, 0, "run before park and hold is refused");
    assert_eq!(after.status & status::TORQUE_ON, 0);
    assert_eq!(host.identity(0).boot, host.feedback(0).boot);
}

#[test]
fn drivers_that_latch_by_themselves_ramp_and_stay_until_cleared() {
    let mut host = Host::running(1, SimSettings::default(), AHEAD);
    host.run_ms(300);
    ask(&mut host, "latch");
    host.run_ms(1);
    host.drive = None;
    host.run_ms(1000);
    let latched = host.feedback(0);
    assert_eq!(latched.status & status::LATCHED, status::LATCHED);
    assert_eq!(latched.status & status::STOP_INPUT_OPEN, 0);
    assert_eq!(host.sim.truth().twist, Twist::ZERO);
    ask(&mut host, "clear");
    host.run_ms(50);
    assert_ne!(host.feedback(0).status & status::LATCHED, 0, "putting right is no reset");
    host.send(0, &ToDrivers::Clear { token: latched.token });
    host.run_ms(50);
    assert_eq!(host.feedback(0).status & status::LATCHED, 0);
}

#[test]
fn an_open_stop_input_latches_and_bars_the_clearing() {
    let mut host = Host::running(1, SimSettings::default(), AHEAD);
    host.run_ms(300);
    ask(&mut host, "stop-input open front");
    host.run_ms(50);
    host.drive = None;
    host.run_ms(1000);
    let open = host.feedback(0);
    let both = status::LATCHED | status::STOP_INPUT_OPEN;
    assert_eq!(open.status & both, both);
    host.send(0, &ToDrivers::Clear { token: open.token });
    host.run_ms(50);
    assert_eq!(host.feedback(0).status & both, both);
    ask(&mut host, "stop-input close front");
    host.run_ms(50);
    assert_eq!(host.feedback(0).status & both, status::LATCHED);
    host.send(0, &ToDrivers::Clear { token: open.token });
    host.run_ms(50);
    assert_eq!(host.feedback(0).status & both, 0);
}

#[test]
fn fault_bits_come_and_go() {
    let mut host = Host::new(1, SimSettings::default());
    for (word, bit) in [
        ("over-current", status::OVER_CURRENT),
        ("over-temperature", status::OVER_TEMPERATURE),
        ("under-voltage", status::UNDER_VOLTAGE),
        ("encoder", status::ENCODER),
    ] {
        ask(&mut host, &format!("{word} rear"));
        host.run_ms(50);
        assert_eq!(host.feedback(1).status & status::FAULTS, bit, "{word}");
        assert_eq!(host.feedback(0).status & status::FAULTS, 0);
    }
    ask(&mut host, "no-fault");
    host.run_ms(50);
    assert_eq!(host.feedback(1).status & status::FAULTS, 0);
}

#[test]
fn the_yaw_rate_can_go_invalid() {
    let mut host = Host::running(1, SimSettings::default(), ALL_WAYS);
    host.run_ms(300);
    assert!(host.feedback(0).yaw_rate > 1000);
    ask(&mut host, "yaw off");
    host.run_ms(50);
    let feedback = host.feedback(0);
    assert_eq!((feedback.status & status::YAW_RATE_VALID, feedback.yaw_rate), (0, 0));
    ask(&mut host, "yaw on");
    host.run_ms(50);
    assert_ne!(host.feedback(0).status & status::YAW_RATE_VALID, 0);
}

#[test]
fn a_stuck_wheel_stands_and_drags_the_base_off_its_path() {
    let mut host = Host::running(1, SimSettings::default(), AHEAD);
    host.run_ms(300);
    ask(&mut host, "stuck front left");
    host.run_ms(300);
    let truth = host.sim.truth();
    assert_eq!(truth.wheel_rad_s[0], 0.0);
    assert_eq!(host.feedback(0).channels[0].speed, 0);
    assert!(truth.twist.turn_rad_s > 0.1 && truth.twist.x_m_s < 0.45, "{truth:?}");
    ask(&mut host, "free front left");
    host.run_ms(300);
    close(host.sim.truth().twist.x_m_s, 0.5, 1e-3);
}

#[test]
fn a_runaway_wheel_turns_as_long_as_there_is_torque() {
    let mut host = Host::new(1, SimSettings::default());
    ask(&mut host, "runaway 0.5 rear right");
    host.set(Mode::Park, Twist::ZERO);
    host.run_ms(200);
    assert_eq!(host.sim.truth().wheel_rad_s[3], 0.0, "no torque, no motion");
    host.set(Mode::Hold, Twist::ZERO);
    host.run_ms(500);
    close(host.sim.truth().wheel_rad_s[3], 12.0, 0.01);
    close(f64::from(host.feedback(1).channels[2].speed) * LSB_RAD_S / -2.0, 12.0, 0.01);
    host.drive = None;
    host.send_all(&ToDrivers::Stop { ramp_ms: 0 });
    host.run_ms(3000);
    assert_eq!(host.sim.truth().wheel_rad_s[3], 0.0);
}

#[test]
fn a_dead_encoder_stands_while_the_wheel_turns() {
    let mut host = Host::running(1, SimSettings::default(), AHEAD);
    host.run_ms(300);
    ask(&mut host, "dead-encoder front right");
    host.run_ms(50);
    let before = host.feedback(0).channels[1];
    host.run_ms(200);
    assert_eq!(host.feedback(0).channels[1], before);
    assert_eq!(before.speed, 0);
    close(host.sim.truth().wheel_rad_s[1], 10.0, 0.01);
    assert_ne!(host.feedback(0).channels[0].speed, 0);
}

#[test]
fn a_skidding_wheel_races_and_does_not_move_the_base() {
    let mut host = Host::running(1, SimSettings::default(), AHEAD);
    host.run_ms(300);
    ask(&mut host, "skid 1.5 rear left");
    host.run_ms(300);
    let truth = host.sim.truth();
    close(truth.wheel_rad_s[2], 15.0, 0.01);
    close(truth.twist.x_m_s, 0.5, 1e-3);
    close(truth.twist.turn_rad_s, 0.0, 1e-3);
    let residual = host.plan.layout.skid(&truth.wheel_rad_s);
    assert!(residual.iter().all(|r| r.abs() > 1.0), "seen in the wheels: {residual:?}");
}

#[test]
fn clear_puts_everything_right() {
    let mut host = Host::running(1, SimSettings::default(), AHEAD);
    host.valid_ms = 1000;
    host.run_ms(50);
    for line in [
        "lossy 0.5",
        "noisy 0.01",
        "slow 30",
        "over-current",
        "yaw off",
        "supply 20",
        "stuck front left",
        "runaway 0.1 front right",
        "dead-encoder rear left",
        "skid 2 rear right",
    ] {
        ask(&mut host, line);
    }
    host.run_ms(200);
    ask(&mut host, "clear");
    host.run_ms(500);
    host.heard.clear();
    let garbled = host.garbled;
    host.run_ms(500);
    assert_eq!((frames_from(&host, 0), frames_from(&host, 1), host.garbled), (100, 100, garbled));
    let feedback = host.feedback(0);
    assert_eq!(feedback.status, status::TORQUE_ON | status::YAW_RATE_VALID);
    assert_eq!(host.sequence.wrapping_sub(feedback.ack), 1, "answers at once");
    close(host.sim.truth().twist.x_m_s, 0.5, 1e-3);
    close(f64::from(feedback.supply_mv), 24_000.0, 500.0);
}
