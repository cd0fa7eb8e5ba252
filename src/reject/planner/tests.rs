//! The planner against its plain definition.
//!
//! On these belts 1 mm takes 1 us, so that every reading and every moment is a whole number and the definition can be
//! written on a grid.

use proptest::prelude::*;
use rand::RngExt;
use rand::SeedableRng;
use rand_pcg::Pcg64Mcg;

use super::*;
use crate::reject::Why;

const GRID: usize = 2_000;

fn grid_belt() -> Motion {
    Motion::at_speed(1e6)
}

/// Nothing leads, nothing limits.
fn plain() -> OutletTiming {
    OutletTiming {
        distance_mm: 0.0,
        margin_mm: 0.0,
        open_lead_us: Micros(0),
        close_lead_us: Micros(0),
        min_on_us: Micros(1),
        min_off_us: Micros(1),
        max_on_us: Micros(1_000_000),
    }
}

fn planner(timings: &[OutletTiming]) -> Planner {
    Planner::new(timings.to_vec()).unwrap()
}

/// Everything that comes by `until`, polled once at the end.
fn drain(planner: &mut Planner, until: i64) -> Vec<Switch> {
    std::iter::from_fn(|| planner.poll(Micros(until), &grid_belt())).collect()
}

/// `(due, on)` of outlet `index`.
fn edges(switches: &[Switch], index: usize) -> Vec<(i64, bool)> {
    let own = switches.iter().filter(|s| s.changed.has(index));
    own.map(|s| (s.due_us.0, s.on.has(index))).collect()
}

fn on_off(pairs: &[(i64, i64)]) -> Vec<(i64, bool)> {
    let both = |&(on, off): &(i64, i64)| [(on, true), (off, false)];
    pairs.iter().flat_map(both).collect()
}

/// Elementary: distance over speed, less the lead. 250 mm at 500 mm/s are 500 ms; 40 mm with 5 mm on either side pass in
/// 100 ms.
#[test]
fn opens_and_shuts_earlier_by_its_leads() {
    let motion = Motion::at_speed(500.0);
    let mut planner = planner(&[OutletTiming {
        distance_mm: 250.0,
        margin_mm: 5.0,
        open_lead_us: Micros(20_000),
        close_lead_us: Micros(30_000),
        ..plain()
    }]);
    planner.add(Micros(100_000), &motion, 0, 5.0, 45.0);
    assert_eq!(planner.next_due(&motion), Some(Micros(480_000)));
    assert_eq!(planner.poll(Micros(479_999), &motion), None);
    let on = planner.poll(Micros(480_000), &motion).unwrap();
    assert_eq!((on.due_us, on.on), (Micros(480_000), Outlets::one(0)));
    let off = planner.poll(Micros(999_999), &motion).unwrap();
    assert_eq!((off.due_us, off.on), (Micros(570_000), Outlets::NONE));
    assert_eq!(planner.next_due(&motion), None);
}

/// Source: MODBUS over Serial Line V1.02, 2.5.1: at 9600 bit/s 8 characters of 11 bits and 3.5 of silence are 13.177 ms.
#[test]
fn leads_are_the_wire_and_the_valve() {
    let line = crate::settings::Line {
        unit: 1,
        baud: 9600,
        parity: crate::settings::Parity::Even,
        answer_within_ms: 50.0,
    };
    let outlet = crate::settings::Outlet {
        name: "nozzle".into(),
        coil: 0,
        distance_mm: 250.0,
        margin_mm: 3.0,
        open_delay_ms: 12.0,
        close_delay_ms: 30.0,
        max_on_ms: 500.0,
    };
    let timing = OutletTiming::of(&outlet, &line);
    let ms = |us: Micros| (us.as_ms() * 100.0).round() / 100.0;
    assert_eq!(
        (ms(timing.open_lead_us), ms(timing.close_lead_us)),
        (25.18, 43.18)
    );
    // A request and its answer take longer than this valve's opening; its shutting takes longer still.
    assert_eq!((ms(timing.min_on_us), ms(timing.min_off_us)), (26.36, 30.0));
}

#[test]
fn a_standing_belt_neither_fires_nor_ages() {
    let mut motion = Motion::at_speed(0.0);
    let mut planner = planner(&[plain()]);
    motion.anchor(Micros(0), 10.0);
    planner.add(Micros(0), &motion, 0, 100.0, 150.0);
    assert_eq!(planner.next_due(&motion), None);
    assert_eq!(planner.poll(Micros(3_600_000_000), &motion), None);
    let mut motion = Motion::at_speed(1000.0);
    motion.anchor(Micros(3_600_000_000), 10.0);
    assert_eq!(planner.next_due(&motion), Some(Micros(3_600_090_000)));
    assert_eq!(planner.counts().late, 0);
}

#[test]
fn a_belt_that_stops_under_an_open_outlet_shuts_it_at_its_limit() {
    let moving = Motion::at_speed(1000.0);
    let timing = OutletTiming {
        max_on_us: Micros(80_000),
        ..plain()
    };
    let mut planner = planner(&[timing]);
    planner.add(Micros(0), &moving, 0, 100.0, 150.0);
    assert!(planner.poll(Micros(120_000), &moving).is_some());
    let mut standing = Motion::at_speed(0.0);
    standing.anchor(Micros(120_000), 120.0);
    assert_eq!(planner.next_due(&standing), Some(Micros(180_000)));
    assert_eq!(
        planner.poll(Micros(200_000), &standing).unwrap().on,
        Outlets::NONE
    );
    let loss = planner.next_loss().unwrap();
    assert_eq!((loss.why, loss.lost_mm), (Why::Cut, 30.0));
}

#[test]
fn overlapping_windows_share_a_pulse_and_near_ones_are_not_parted() {
    let timing = OutletTiming {
        min_off_us: Micros(10),
        ..plain()
    };
    let mut planner = planner(&[timing]);
    for (lead, trail) in [
        (100.0, 150.0),
        (120.0, 200.0),
        (209.0, 220.0),
        (230.0, 240.0),
    ] {
        planner.add(Micros(0), &grid_belt(), 0, lead, trail);
    }
    let switches = drain(&mut planner, 1_000);
    assert_eq!(edges(&switches, 0), on_off(&[(100, 220), (230, 240)]));
    assert_eq!(planner.counts().pulses, 2);
}

/// The signal to shut would leave before the signal to open: the valve is given the time it needs.
#[test]
fn a_window_shorter_than_the_valve_gets_the_shortest_pulse() {
    let timing = OutletTiming {
        open_lead_us: Micros(5),
        close_lead_us: Micros(40),
        min_on_us: Micros(15),
        ..plain()
    };
    let mut planner = planner(&[timing]);
    planner.add(Micros(0), &grid_belt(), 0, 100.0, 120.0);
    let switches = drain(&mut planner, 1_000);
    assert_eq!(edges(&switches, 0), on_off(&[(95, 110)]));
}

#[test]
fn too_long_is_cut_counted_and_told() {
    let timing = OutletTiming {
        max_on_us: Micros(60),
        ..plain()
    };
    let mut planner = planner(&[timing]);
    planner.add(Micros(0), &grid_belt(), 0, 100.0, 200.0);
    planner.add(Micros(0), &grid_belt(), 0, 300.0, 310.0);
    planner.add(Micros(0), &grid_belt(), 0, 150.0, 250.0);
    let mut switches = drain(&mut planner, 180);
    // Grows the stretch that was cut: lost with it.
    planner.add(Micros(180), &grid_belt(), 0, 240.0, 260.0);
    switches.extend(drain(&mut planner, 1_000));
    assert_eq!(edges(&switches, 0), on_off(&[(100, 160), (300, 310)]));
    let losses: Vec<_> = std::iter::from_fn(|| planner.next_loss()).collect();
    let told: Vec<_> = losses
        .iter()
        .map(|l| (l.at_us.0, l.why, l.lost_mm))
        .collect();
    assert_eq!(told, [(160, Why::Cut, 90.0), (180, Why::Cut, 10.0)]);
    assert_eq!(planner.counts().cut_mm, 100.0);
}

#[test]
fn too_late_opens_at_once_and_wholly_past_is_missed() {
    let mut planner = planner(&[plain()]);
    planner.add(Micros(130), &grid_belt(), 0, 100.0, 150.0);
    planner.add(Micros(200), &grid_belt(), 0, 160.0, 200.0);
    assert_eq!(edges(&drain(&mut planner, 999), 0), on_off(&[(130, 150)]));
    let counts = *planner.counts();
    assert_eq!(
        (counts.late, counts.latest_us, counts.late_mm),
        (1, Micros(30), 30.0)
    );
    assert_eq!((counts.missed, counts.missed_mm), (1, 40.0));
}

/// Two parts side by side, the second decided after the outlet was told to shut: only what is new is asked for again.
#[test]
fn what_the_last_pulse_covered_is_not_asked_for_again() {
    let timing = OutletTiming {
        close_lead_us: Micros(30),
        ..plain()
    };
    let mut planner = planner(&[timing]);
    planner.add(Micros(0), &grid_belt(), 0, 100.0, 200.0);
    planner.add(Micros(175), &grid_belt(), 0, 110.0, 190.0);
    planner.add(Micros(180), &grid_belt(), 0, 150.0, 260.0);
    let switches = drain(&mut planner, 1_000);
    assert_eq!(edges(&switches, 0), on_off(&[(100, 170), (200, 230)]));
    assert_eq!((planner.counts().late, planner.counts().missed), (0, 0));
}

#[test]
fn outlets_that_change_together_share_a_switch() {
    let mut planner = planner(&[plain(), plain(), plain()]);
    for (outlet, lead, trail) in [(0, 100.0, 150.0), (2, 100.0, 160.0), (1, 150.0, 170.0)] {
        planner.add(Micros(0), &grid_belt(), outlet, lead, trail);
    }
    let both = |a, b| Outlets::one(a).with(b);
    let seen: Vec<_> = drain(&mut planner, 999)
        .iter()
        .map(|s| (s.due_us.0, s.changed, s.on))
        .collect();
    assert_eq!(
        seen,
        [
            (100, both(0, 2), both(0, 2)),
            (150, both(0, 1), both(1, 2)),
            (160, Outlets::one(2), Outlets::one(1)),
            (170, Outlets::one(1), Outlets::NONE),
        ]
    );
}

#[test]
fn finish_turns_everything_off_once() {
    let mut planner = planner(&[plain(), plain()]);
    planner.add(Micros(0), &grid_belt(), 0, 100.0, 150.0);
    planner.add(Micros(0), &grid_belt(), 1, 110.0, 150.0);
    planner.add(Micros(0), &grid_belt(), 1, 300.0, 350.0);
    let end: Vec<_> = std::iter::from_fn(|| planner.finish(Micros(120), &grid_belt())).collect();
    let dues: Vec<_> = end.iter().map(|s| s.due_us.0).collect();
    assert_eq!(dues, [100, 110, 120]);
    assert_eq!(
        (end[2].changed, end[2].on),
        (Outlets::first(2), Outlets::NONE)
    );
    assert_eq!(
        (planner.counts().ended, planner.counts().ended_mm),
        (3, 110.0)
    );
    assert_eq!(planner.next_due(&grid_belt()), None);
}

#[test]
fn more_outlets_than_fit_are_refused() {
    let came = MAX_OUTLETS + 1;
    let refused = Planner::new(vec![plain(); came]).unwrap_err();
    assert_eq!(refused, PlanError::TooManyOutlets { came });
}

prop_compose! {
    fn any_timing()(
        distance in 0..50_i32,
        margin in 0..6_i32,
        open_lead in 0..25_i64,
        close_lead in 0..25_i64,
        min_on in 1..12_i64,
        min_off in 1..12_i64,
        max_on in prop_oneof![12..80_i64, Just(100_000)],
    ) -> OutletTiming {
        OutletTiming {
            distance_mm: f64::from(distance),
            margin_mm: f64::from(margin),
            open_lead_us: Micros(open_lead),
            close_lead_us: Micros(close_lead),
            min_on_us: Micros(min_on),
            min_off_us: Micros(min_off),
            max_on_us: Micros(max_on),
        }
    }
}

/// Which millimetres of the belt pass `timing`'s outlet while it should be open.
fn wanted_cells(timing: &OutletTiming, windows: &[(i64, i64)]) -> Vec<bool> {
    let shift = timing.distance_mm as i64;
    let margin = timing.margin_mm as i64;
    let mut cells = vec![false; GRID];
    for &(lead, trail) in windows {
        for cell in lead + shift - margin..trail + shift + margin {
            cells[cell as usize] = true;
        }
    }
    cells
}

/// The plain definition, for windows that are all known long before: the union of the windows; each piece asks for the
/// outlet from its start less the lead to its end less the lead, but never shorter than the valve can follow; pieces
/// with a pause that the valve cannot follow become one; what is longer than the limit is cut.
fn by_definition(timing: &OutletTiming, windows: &[(i64, i64)]) -> Vec<(i64, i64)> {
    let cells = wanted_cells(timing, windows);
    let starts = (1..GRID).filter(|&i| cells[i] && !cells[i - 1]);
    let mut pulses: Vec<(i64, i64)> = Vec::new();
    for start in starts {
        let end = (start..GRID).find(|&i| !cells[i]).unwrap() as i64;
        let on = start as i64 - timing.open_lead_us.0;
        let off = end - timing.close_lead_us.0;
        let clip = |on: i64, off: i64| {
            off.max(on + timing.min_on_us.0)
                .min(on + timing.max_on_us.0)
        };
        match pulses.last_mut() {
            Some(last) if on < last.1 + timing.min_off_us.0 => last.1 = clip(last.0, off),
            _ => pulses.push((on, clip(on, off))),
        }
    }
    pulses
}

/// Adds each window when it is decided, and polls in between where `polls` says so.
fn play(timing: OutletTiming, adds: &[(i64, i64, i64)], polls: &[bool]) -> (Vec<Switch>, Counts) {
    let motion = grid_belt();
    let mut planner = planner(&[timing]);
    let mut switches = Vec::new();
    let mut adds = adds.iter().peekable();
    for now in 0..GRID as i64 {
        // Before and after the additions of a moment, because either may happen.
        let polled = [
            polls[2 * now as usize % polls.len()],
            polls[(2 * now as usize + 1) % polls.len()],
        ];
        if polled[0] {
            switches.extend(std::iter::from_fn(|| planner.poll(Micros(now), &motion)));
        }
        while let Some(&&(_, lead, trail)) = adds.peek().filter(|add| add.0 == now) {
            planner.add(Micros(now), &motion, 0, lead as f64, trail as f64);
            adds.next();
        }
        if polled[1] {
            switches.extend(std::iter::from_fn(|| planner.poll(Micros(now), &motion)));
        }
    }
    switches.extend(std::iter::from_fn(|| {
        planner.finish(Micros(GRID as i64), &motion)
    }));
    (switches, *planner.counts())
}

/// Windows decided at random moments, some of them far too late: `(decided, lead, trail)`.
fn any_adds() -> impl Strategy<Value = Vec<(i64, i64, i64)>> {
    let one = (0..900_i64, -60..150_i64, 1..50_i64);
    prop::collection::vec(one, 0..25).prop_map(|mut all| {
        all.sort_by_key(|add| add.0);
        let windows = all.into_iter();
        windows
            .map(|(now, ahead, long)| (now, (now + ahead).max(40), (now + ahead).max(40) + long))
            .collect()
    })
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(512))]

    #[test]
    fn known_in_time_it_is_the_definition(
        timing in any_timing(),
        windows in prop::collection::vec((100..900_i64, 1..60_i64), 0..20),
    ) {
        let windows: Vec<_> = windows.iter().map(|&(lead, long)| (lead, lead + long)).collect();
        let adds: Vec<_> = windows.iter().map(|&(lead, trail)| (0, lead, trail)).collect();
        let (switches, counts) = play(timing, &adds, &[false]);
        prop_assert_eq!(edges(&switches, 0), on_off(&by_definition(&timing, &windows)));
        prop_assert_eq!((counts.late, counts.missed, counts.ended), (0, 0, 0));
        prop_assert!(counts.cut_mm == 0.0 || timing.max_on_us.0 < 100_000);
    }

    #[test]
    fn polling_more_or_less_often_changes_nothing(
        timing in any_timing(),
        adds in any_adds(),
        polls in prop::collection::vec(any::<bool>(), 1..40),
    ) {
        let seldom = play(timing, &adds, &[false]);
        prop_assert_eq!(&seldom, &play(timing, &adds, &[true]));
        prop_assert_eq!(&seldom, &play(timing, &adds, &polls));
    }

    #[test]
    fn every_pulse_has_a_reason_and_every_loss_is_counted(timing in any_timing(), adds in any_adds()) {
        let (switches, counts) = play(timing, &adds, &[true, false]);
        let edges = edges(&switches, 0);
        prop_assert!(edges.iter().enumerate().all(|(i, edge)| edge.1 == (i % 2 == 0)));
        prop_assert!(edges.len().is_multiple_of(2), "it ends off");
        let pulses: Vec<_> = edges.chunks(2).map(|pair| (pair[0].0, pair[1].0)).collect();
        prop_assert_eq!(pulses.len() as u64, counts.pulses);

        let windows: Vec<_> = adds.iter().map(|add| (add.1, add.2)).collect();
        let cells = wanted_cells(&timing, &windows);
        let wanted = |mm: i64| cells.get(mm as usize).copied().unwrap_or(false);
        let mut blown = vec![false; GRID];
        for &(on, off) in &pulses {
            prop_assert!(off - on >= timing.min_on_us.0.min(timing.max_on_us.0));
            prop_assert!(off - on <= timing.max_on_us.0);
            let open = on + timing.open_lead_us.0;
            let shut = off + timing.close_lead_us.0;
            prop_assert!(wanted(open), "opens on belt that was asked for");
            let shortest = off - on == timing.min_on_us.0;
            let mut ends = windows.iter().map(|w| w.1 + (timing.distance_mm + timing.margin_mm) as i64);
            let limit = off - on == timing.max_on_us.0;
            prop_assert!(shortest || limit || ends.any(|end| end == shut), "shuts where a window ends");
            let known: Vec<_> = adds.iter().filter(|add| add.0 < off).map(|add| (add.1, add.2)).collect();
            let asked = wanted_cells(&timing, &known);
            // Belt that nobody asked for passes open only where the pause would be too short for the valve.
            let mut asked_until = open;
            for mm in open..shut {
                blown[mm as usize] = true;
                if !asked[mm as usize] {
                    continue;
                }
                let could_shut = (asked_until - timing.close_lead_us.0).max(on + timing.min_on_us.0);
                let next_on = mm - timing.open_lead_us.0;
                // What starts after the pause has its own pulse, even if the valve is still shutting over it.
                let own_pulse = next_on >= off + timing.min_off_us.0;
                prop_assert!(mm == asked_until || own_pulse || next_on < could_shut + timing.min_off_us.0);
                asked_until = if mm != asked_until && own_pulse { asked_until } else { mm + 1 };
            }
            prop_assert!(asked_until >= shut || shortest || limit);
        }
        for pair in pulses.windows(2) {
            prop_assert!(pair[1].0 - pair[0].1 >= timing.min_off_us.0);
        }
        let passed = (0..GRID).filter(|&mm| cells[mm] && !blown[mm]).count();
        let counted = counts.late_mm + counts.missed_mm + counts.cut_mm + counts.ended_mm;
        prop_assert!(passed as f64 <= counted + 1e-6, "{} mm passed, {} mm counted", passed, counted);
    }
}

/// A simulated station: parts 60 mm apart, the nozzle 150 mm behind the edge, verdicts 150 ms after the part's trailing
/// edge came into view, each up to `jitter` later. On time, late and missed parts, and the worst lateness in ms.
fn station(speed_mm_s: f64, jitter_ms: f64) -> [f64; 4] {
    let motion = Motion::at_speed(speed_mm_s);
    let mut planner = planner(&[OutletTiming {
        distance_mm: 150.0,
        margin_mm: 3.0,
        open_lead_us: Micros(18_589),
        close_lead_us: Micros(18_589),
        min_on_us: Micros(13_178),
        min_off_us: Micros(13_178),
        max_on_us: Micros(1_000_000),
    }]);
    let mut random = Pcg64Mcg::seed_from_u64(20);
    let mut now = Micros::ZERO;
    for part in 0..200 {
        let lead_mm = 60.0 * f64::from(part);
        let late_ms = random.random_range(0.0..1.0) * jitter_ms;
        let decided = motion.time_of(lead_mm + 40.0) + Micros::from_ms(150.0 + late_ms);
        // Verdicts come in order: one that is held up holds up those behind it.
        now = now.max(decided);
        while planner.poll(now, &motion).is_some() {}
        planner.add(now, &motion, 0, lead_mm, lead_mm + 40.0);
    }
    while planner.poll(Micros::MAX, &motion).is_some() {}
    let counts = planner.counts();
    let in_time = counts.windows - counts.late - counts.missed;
    let figures = [in_time, counts.late, counts.missed].map(|n| n as f64);
    [figures[0], figures[1], figures[2], counts.latest_us.as_ms()]
}

#[test]
fn belt_speed_and_jitter_decide_what_is_in_time() {
    let mut table = String::from("mm/s  jitter ms  in time  late  missed  latest ms\n");
    for speed_mm_s in [200.0, 400.0, 600.0, 800.0] {
        for jitter_ms in [0.0, 50.0, 150.0, 400.0] {
            let [in_time, late, missed, latest_ms] = station(speed_mm_s, jitter_ms);
            assert_eq!(in_time + late + missed, 200.0);
            table += &format!(
                "{speed_mm_s:4}  {jitter_ms:9}  {in_time:7}  {late:4}  {missed:6}  {latest_ms:9.3}\n"
            );
        }
    }
    assert_eq!(table, include_str!("in_time.txt"), "came:\n{table}");
}
