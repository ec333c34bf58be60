//! First arrivals around slow bodies and along fast walls, against closed forms:
//! the head wave's t = L/v₂ + 2 w √(1/v₁² − 1/v₂²) (any textbook) and the taut
//! string around a body too slow to enter.

mod common;

use common::edges;
use rayloom_core::blocks::Blocks;
use rayloom_core::frame::FlatChart;
use rayloom_core::monitor::Monitor;
use rayloom_core::quality::Quality;
use rayloom_core::rays::{Method, RayBatch, trace_between};
use rayloom_core::vec3::{Vec3, distance};

const BLOCK_KM: f64 = 15.0;
const DEPTH_KM: f64 = 300.0;
const COUNTS: [usize; 3] = [12, 12, 20];
/// A time may be later than exact by this (s).
const TOLERANCE_S: f64 = 0.002;

/// Blocks around the vertical axis x = y = 0, velocity by block centre.
fn model(velocity_km_s: impl Fn(Vec3) -> f64) -> Blocks<FlatChart> {
    let half = -0.5 * BLOCK_KM * COUNTS[0] as f64;
    let axes = [
        edges(COUNTS[0], half, BLOCK_KM),
        edges(COUNTS[1], half, BLOCK_KM),
        edges(COUNTS[2], 0.0, BLOCK_KM),
    ];
    let centre = |axis: usize, index: usize| 0.5 * (axes[axis][index] + axes[axis][index + 1]);
    let mut slowness = Vec::new();
    for x in 0..COUNTS[0] {
        for y in 0..COUNTS[1] {
            for z in 0..COUNTS[2] {
                let at = [centre(0, x), centre(1, y), centre(2, z)];
                slowness.push(1.0 / velocity_km_s(at));
            }
        }
    }
    Blocks::new(FlatChart, axes, slowness).expect("edges rise and slowness is positive")
}

/// Points of the only ray, after checks that it is sound: no block twice, no
/// segment without length, every point on the faces of both its blocks.
fn check_course(blocks: &Blocks<FlatChart>, rays: &RayBatch) {
    let points = &rays.points_km;
    let mut seen = std::collections::HashSet::new();
    for (ends, &block) in points.windows(2).zip(&rays.segment_blocks) {
        assert!(seen.insert(block), "block {block} comes twice");
        assert!(distance(ends[0], ends[1]) > 0.0, "a segment has no length");
        for point in ends {
            for (axis, coordinate) in point.iter().enumerate() {
                let (low, high) = blocks.range(block as u32, axis);
                assert!((low - 1e-9..=high + 1e-9).contains(coordinate));
            }
        }
    }
}

fn check_time(blocks: &Blocks<FlatChart>, [from, to]: [Vec3; 2], exact_s: f64) {
    for quality in [Quality::standard(), Quality::thorough()] {
        for ends in [[from, to], [to, from]] {
            let choice = (Method::Bent, quality);
            let rays = trace_between(
                blocks,
                &ends[..1],
                &ends[1..],
                &[[0, 0]],
                choice,
                &Monitor::default(),
            )
            .expect("the ends lie inside");
            let late = rays.time_s[0] - exact_s;
            println!("late by {:.3} ms", 1e3 * late);
            assert!((-1e-6..TOLERANCE_S).contains(&late), "late by {late} s");
            check_course(blocks, &rays);
        }
    }
}

fn head_wave_s(way_km: f64, wall_km: f64, slow: f64, fast: f64) -> f64 {
    way_km / fast + 2.0 * wall_km * (slow.powi(-2) - fast.powi(-2)).sqrt()
}

#[test]
fn the_wave_leaves_a_pipe_that_is_ten_percent_slow() {
    let (slow, fast) = (7.2, 8.0);
    let pipe = |at: Vec3| at[0].abs() < BLOCK_KM && at[1].abs() < BLOCK_KM;
    let blocks = model(|at| if pipe(at) { slow } else { fast });
    let ends = [[1.0, 0.5, DEPTH_KM - 1.0], [1.0, 0.5, 0.0]];
    let exact = head_wave_s(DEPTH_KM - 1.0, BLOCK_KM - 1.0, slow, fast);
    check_time(&blocks, ends, exact);
}

#[test]
fn the_wave_goes_around_a_body_that_is_twenty_percent_slow() {
    let (slow, fast) = (6.4, 8.0);
    let lens = |at: Vec3| {
        at[0].abs() < 2.0 * BLOCK_KM
            && at[1].abs() < 2.0 * BLOCK_KM
            && (120.0..180.0).contains(&at[2])
    };
    let blocks = model(|at| if lens(at) { slow } else { fast });
    let ends = [[2.0, 0.5, DEPTH_KM - 1.0], [2.0, 0.5, 0.0]];
    let aside = 2.0 * BLOCK_KM - 2.0;
    let string = aside.hypot(120.0) + 60.0 + aside.hypot(119.0);
    check_time(&blocks, ends, string / fast);
}

#[test]
fn the_wave_runs_along_a_wall_from_six_to_eight_kilometres_a_second() {
    let (slow, fast) = (6.0, 8.0);
    let blocks = model(|at| if at[0] < 0.0 { slow } else { fast });
    let ends = [[-40.0, 3.0, DEPTH_KM - 1.0], [-40.0, 3.0, 0.0]];
    let exact = head_wave_s(DEPTH_KM - 1.0, 40.0, slow, fast);
    check_time(&blocks, ends, exact);
}
