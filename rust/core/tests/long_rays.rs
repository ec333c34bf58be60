//! Long rays through rough models against stored references, which the example
//! `long_ray_reference` computes by finer and wider searches from both ends.

#[path = "long_rays/cases.rs"]
mod cases;

use cases::{ENDS, Roughness, ends, model, radius_km};
use rayloom_core::blocks::Blocks;
use rayloom_core::frame::{Chart, FlatChart, SphereChart};
use rayloom_core::monitor::Monitor;
use rayloom_core::quality::Quality;
use rayloom_core::rays::{Method, trace_between};

const REFERENCE: &str = include_str!("long_rays/reference.csv");

/// Straight-ray and reference times (s) of a case, start by start.
fn stored(frame: &str, name: &str) -> Vec<[f64; 2]> {
    let prefix = format!("{frame},{name},");
    let times: Vec<[f64; 2]> = REFERENCE
        .lines()
        .filter_map(|line| line.strip_prefix(&prefix))
        .map(|rest| {
            let mut last = rest.rsplit(',').map(|cell| cell.parse().expect("a number"));
            let time_s = last.next().expect("a time");
            [last.next().expect("a straight ray's time"), time_s]
        })
        .collect();
    assert_eq!(times.len(), ENDS[0] * ENDS[1], "{frame}, {name}");
    times
}

/// Times later than the reference (ms), start by start.
fn lateness<C: Chart>(blocks: &Blocks<C>, stored: &[[f64; 2]], quality: Quality) -> Vec<f64> {
    let [starts, goals] = ends();
    let pairs: Vec<[u32; 2]> = (0..ENDS[0] as u32)
        .flat_map(|start| (0..ENDS[1] as u32).map(move |goal| [start, goal]))
        .collect();
    let trace = |method| {
        let choice = (method, quality);
        trace_between(blocks, &starts, &goals, &pairs, choice, &Monitor::default())
            .expect("the points lie inside the model")
            .time_s
    };
    for (times, straight) in stored.iter().zip(trace(Method::Straight)) {
        assert!((straight - times[0]).abs() < 1e-6, "another model");
    }
    let late = stored.iter().zip(trace(Method::Bent));
    late.map(|(times, time)| 1e3 * (time - times[1])).collect()
}

/// Mean size of the difference and share later than 30 ms within the wanted bounds.
fn check(name: &str, late_ms: &[f64], (mean_ms, late_share): (f64, f64)) {
    let count = late_ms.len() as f64;
    let mean = late_ms.iter().map(|late| late.abs()).sum::<f64>() / count;
    let share = late_ms.iter().filter(|&&late| late > 30.0).count() as f64 / count;
    println!(
        "{name}: mean {mean:.2} ms, {:.1} % later than 30 ms",
        100.0 * share
    );
    assert!(mean <= mean_ms, "{name}: mean {mean} ms");
    assert!(
        share <= late_share,
        "{name}: share {share} later than 30 ms"
    );
}

fn check_level(quality: Quality, bounds: [(f64, f64); 3]) {
    for ((roughness, name), bounds) in Roughness::ALL.into_iter().zip(bounds) {
        let flat = lateness(&model(FlatChart, roughness), &stored("flat", name), quality);
        check(&format!("flat, {name}"), &flat, bounds);
        let blocks = model(SphereChart::new(radius_km()), roughness);
        let sphere = lateness(&blocks, &stored("sphere", name), quality);
        check(&format!("sphere, {name}"), &sphere, bounds);
    }
}

/// The aim is a mean of 6 ms in smooth models; in the flat one it is 6.2 ms.
#[test]
fn standard_is_off_by_few_milliseconds_though_by_more_than_six_in_a_smooth_model() {
    check_level(Quality::standard(), [(6.3, 0.05), (8.0, 0.05), (8.0, 0.05)]);
}

/// The aim is at most 1 % of rays later than 30 ms; in the smooth flat model one
/// of the thirty still is, by 32 ms.
#[test]
fn thorough_is_off_by_fewer_milliseconds_but_for_one_ray_of_a_smooth_model() {
    check_level(
        Quality::thorough(),
        [(2.5, 1.0 / 30.0), (3.0, 0.01), (4.0, 0.01)],
    );
}
