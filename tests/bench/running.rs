//! A running drive at 1 kHz on the stand-in: how late its ticks wake, alone and while its console is flooded.

use gripline::config::{EXAMPLE, parse};
use gripline::drill::Flood;
use gripline::measure::child::{Driving, Folder, PAD_THERE, Said, Standin};
use gripline::record::Item;
use gripline::record::reader::Run;
use gripline::sys::clock;
use gripline::units::Mono;

/// How late the ticks of a stretch woke, microseconds: median, 99.9 %.
pub(crate) struct Late {
    pub(crate) alone_us: [f64; 2],
    pub(crate) flooded_us: [f64; 2],
}

/// Seconds that each stretch takes.
const STRETCH_S: f64 = 4.0;

pub(crate) fn measure() -> Option<Late> {
    let text =
        EXAMPLE.replace("baud = 460800", "baud = 3000000").replace("[loop]\n", "[loop]\nrate_hz = 1000.0\n");
    let text = if text.contains("rate_hz = 1000.0") { text } else { text + "\n[loop]\nrate_hz = 1000.0\n" };
    let (plan, _) = parse(&text, "bench").map_err(|it| it[0].to_string()).unwrap();
    let folder = Folder::new("bench").unwrap();
    let config = folder.write("cart.toml", &text).unwrap();
    let hands = "0.7,Start,1\n0.8,Start,0\n1.0,RightTrigger2,1\n1.2,LeftStickY,1\n14.0,end,\n";
    let hands = folder.write("hands.csv", hands).unwrap();
    let program = std::path::Path::new(env!("CARGO_BIN_EXE_gripline"));
    let mut standin = Standin::start(program, &config, &folder, &plan).unwrap();
    let mut arguments = Driving::ports(&folder, &plan);
    arguments.extend(["--hands".into(), hands.display().to_string()]);
    let mut driving = Driving::start(program, &config, &folder, &folder.path, arguments).unwrap();
    let began = loop {
        match driving.said(std::time::Duration::from_secs(5)) {
            Said::Line(line) if line.contains(PAD_THERE) => break clock::now(),
            Said::Line(_) => {}
            Said::Nothing | Said::Ended => return None,
        }
    };
    let at = |s: f64| began.plus_ns((s * 1e9) as u64);
    clock::sleep_until(at(2.0 + STRETCH_S + 0.5));
    let flood = Flood::start(&folder.socket());
    clock::sleep_until(at(2.0 + 2.0 * STRETCH_S + 1.0));
    drop(flood);
    while driving.said(std::time::Duration::from_secs(10)) != Said::Ended {}
    standin.end();
    let mut run = Run::open(driving.run.as_ref()?).unwrap();
    let mut ticks: Vec<(Mono, f64)> = Vec::new();
    while let Some(item) = run.next() {
        if let Item::Tick(tick) = item {
            ticks.push((tick.inputs.now, tick.inputs.now.since_ns(tick.inputs.due) as f64 / 1e3));
        }
    }
    let late = |from: f64| {
        let within = |it: &&(Mono, f64)| it.0 >= at(from) && it.0 < at(from + STRETCH_S);
        let mut late: Vec<f64> = ticks.iter().filter(within).map(|it| it.1).collect();
        late.sort_by(f64::total_cmp);
        (!late.is_empty()).then(|| [late[late.len() / 2], late[late.len() * 999 / 1000]])
    };
    Some(Late { alone_us: late(2.0)?, flooded_us: late(2.0 + STRETCH_S + 1.0)? })
}
