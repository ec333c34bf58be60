//! What every traced ray must satisfy, on random models.

mod common;

use common::{Random, edges, point_inside, rough_model, uneven_edges};
use rayloom_core::blocks::Blocks;
use rayloom_core::course::path_along;
use rayloom_core::frame::{Chart, FlatChart, SphereChart};
use rayloom_core::monitor::Monitor;
use rayloom_core::quality::Quality;
use rayloom_core::rays::{Method, RayBatch, trace_between};
use rayloom_core::vec3::Vec3;

fn all_pairs(first: usize, second: usize) -> Vec<[u32; 2]> {
    (0..first as u32)
        .flat_map(|a| (0..second as u32).map(move |b| [a, b]))
        .collect()
}

fn trace<C: Chart>(blocks: &Blocks<C>, ends: [&[Vec3]; 2], choice: (Method, Quality)) -> RayBatch {
    let pairs = all_pairs(ends[0].len(), ends[1].len());
    trace_between(
        blocks,
        ends[0],
        ends[1],
        &pairs,
        choice,
        &Monitor::default(),
    )
    .expect("the points lie inside the model")
}

/// Each segment lies in its block, neighbours share a face, and the time is the
/// sum of slowness times length.
fn check_polylines<C: Chart>(blocks: &Blocks<C>, rays: &RayBatch) {
    for ray in 0..rays.time_s.len() {
        let range = rays.point_offsets[ray] as usize..rays.point_offsets[ray + 1] as usize;
        let points = &rays.points_km[range.clone()];
        let sequence = &rays.segment_blocks[range.start..range.end - 1];
        let mut time = 0.0;
        for (ends, &block) in points.windows(2).zip(sequence) {
            let block = block as u32;
            for point in ends {
                for (axis, &coordinate) in point.iter().enumerate() {
                    let (low, high) = blocks.range(block, axis);
                    assert!(coordinate >= low - 1e-9 && coordinate <= high + 1e-9);
                }
            }
            time += blocks.slowness_of(block) * blocks.chart().distance(ends[0], ends[1]);
        }
        for pair in sequence.windows(2) {
            let (a, b) = (blocks.cell(pair[0] as u32), blocks.cell(pair[1] as u32));
            let steps: usize = (0..3).map(|axis| a[axis].abs_diff(b[axis])).sum();
            assert_eq!(steps, 1, "blocks {a:?} and {b:?} share no face");
        }
        assert!((time - rays.time_s[ray]).abs() <= 1e-9 * time);
        let along = path_along(blocks, points).expect("the poly-line runs from block to block");
        assert!(along.time(blocks) <= rays.time_s[ray] + 1e-5);
        let row = rays.row_pointers[ray] as usize..rays.row_pointers[ray + 1] as usize;
        let product: f64 = rays.columns[row.clone()]
            .iter()
            .zip(&rays.lengths_km[row])
            .map(|(&block, length)| blocks.slowness_of(block as u32) * length)
            .sum();
        assert!((product + rays.outside_time_s[ray] - rays.time_s[ray]).abs() <= 1e-5);
    }
}

fn check_model<C: Chart>(blocks: &Blocks<C>, random: &mut Random) {
    let sources: Vec<Vec3> = (0..5).map(|_| point_inside(blocks, random)).collect();
    let receivers: Vec<Vec3> = (0..4).map(|_| point_inside(blocks, random)).collect();
    let quality = Quality::standard();
    let graph = trace(blocks, [&sources, &receivers], (Method::Graph, quality));
    let bent = trace(blocks, [&sources, &receivers], (Method::Bent, quality));
    let straight = trace(blocks, [&sources, &receivers], (Method::Straight, quality));
    for rays in [&graph, &bent, &straight] {
        assert!(rays.traced.iter().all(|&traced| traced));
    }
    check_polylines(blocks, &bent);
    assert!(bent.bound_check.checked > 0);
    check_polylines(blocks, &graph);
    for ray in 0..bent.time_s.len() {
        assert!(bent.time_s[ray] <= graph.time_s[ray] + 1e-9);
        assert!(bent.time_s[ray] <= straight.time_s[ray] + 0.01);
    }
}

#[test]
fn rays_in_random_flat_models_are_valid() {
    let mut random = Random(11);
    for _ in 0..4 {
        let axes = [8, 7, 6].map(|count| uneven_edges(count, 0.0, 15.0, &mut random));
        check_model(
            &rough_model(FlatChart, axes, 0.15, &mut random),
            &mut random,
        );
    }
}

#[test]
fn rays_in_random_spherical_models_are_valid() {
    let mut random = Random(12);
    for _ in 0..4 {
        let axes = [
            uneven_edges(8, -500.0, 60.0, &mut random),
            uneven_edges(7, 200.0, 60.0, &mut random),
            uneven_edges(6, -5.0, 40.0, &mut random),
        ];
        let model = rough_model(SphereChart::new(6371.0), axes, 0.15, &mut random);
        check_model(&model, &mut random);
    }
}

#[test]
fn homogeneous_rays_are_straight() {
    let mut random = Random(13);
    let model = rough_model(
        FlatChart,
        [
            edges(12, 0.0, 15.0),
            edges(10, 0.0, 15.0),
            edges(8, 0.0, 15.0),
        ],
        0.0,
        &mut random,
    );
    let sources: Vec<Vec3> = (0..6).map(|_| point_inside(&model, &mut random)).collect();
    let receivers: Vec<Vec3> = (0..6).map(|_| point_inside(&model, &mut random)).collect();
    for quality in [Quality::standard(), Quality::thorough()] {
        let rays = trace(&model, [&sources, &receivers], (Method::Bent, quality));
        for (pair, time) in all_pairs(6, 6).iter().zip(&rays.time_s) {
            let (from, to) = (sources[pair[0] as usize], receivers[pair[1] as usize]);
            let exact = rayloom_core::vec3::distance(from, to) / 6.0;
            assert!((time - exact).abs() <= 5e-5, "{time} for {exact}");
        }
    }
}

#[test]
fn exchange_of_ends_changes_little() {
    let mut random = Random(14);
    let model = rough_model(
        FlatChart,
        [
            edges(10, 0.0, 15.0),
            edges(10, 0.0, 15.0),
            edges(8, 0.0, 15.0),
        ],
        0.05,
        &mut random,
    );
    let ends: Vec<Vec3> = (0..6).map(|_| point_inside(&model, &mut random)).collect();
    let choice = (Method::Bent, Quality::thorough());
    let (near, far) = ends.split_at(2);
    let forth = trace(&model, [near, far], choice);
    let back = trace(&model, [far, near], choice);
    for a in 0..near.len() {
        for b in 0..far.len() {
            let difference = forth.time_s[a * far.len() + b] - back.time_s[b * near.len() + a];
            assert!(difference.abs() <= 0.02, "{difference} s");
        }
    }
}

#[test]
fn time_changes_by_length_times_slowness() {
    let mut random = Random(15);
    let axes = [
        edges(8, 0.0, 15.0),
        edges(8, 0.0, 15.0),
        edges(6, 0.0, 15.0),
    ];
    let model = rough_model(FlatChart, axes.clone(), 0.05, &mut random);
    let ends = [vec![[5.0, 7.0, 80.0]], vec![[110.0, 100.0, 3.0]]];
    let choice = (Method::Bent, Quality::thorough());
    let before = trace(&model, [&ends[0], &ends[1]], choice);
    for (&block, &length) in before.columns.iter().zip(&before.lengths_km) {
        let mut slowness = model.slowness().to_vec();
        let step = 1e-6 * slowness[block as usize];
        slowness[block as usize] += step;
        let changed = Blocks::new(FlatChart, axes.clone(), slowness).expect("still positive");
        let after = trace(&changed, [&ends[0], &ends[1]], choice);
        let derivative = (after.time_s[0] - before.time_s[0]) / step;
        assert!(
            (derivative - length).abs() <= 0.05,
            "{derivative} for {length}"
        );
    }
}
