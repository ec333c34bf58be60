//! The coarse search against a slow, plain reference: Dijkstra's method on the
//! explicit graph, node by node, in double precision.

mod common;

use std::cmp::Reverse;
use std::collections::{BinaryHeap, HashMap};

use common::{Random, edges, point_inside, rough_model, uneven_edges};
use rayloom_core::blocks::Blocks;
use rayloom_core::frame::{Chart, FlatChart, SphereChart};
use rayloom_core::lattice::Lattice;
use rayloom_core::monitor::Monitor;
use rayloom_core::search::coarse::{CoarseField, CoarseSearch};
use rayloom_core::vec3::Vec3;

/// Every block links all its surface nodes; the source links to its block's.
fn dijkstra<C: Chart>(blocks: &Blocks<C>, lattice: &Lattice, source: Vec3) -> Vec<f64> {
    let surface = lattice.surface();
    let mut blocks_of: HashMap<usize, Vec<(u32, usize)>> = HashMap::new();
    for block in 0..blocks.count() as u32 {
        let base = lattice.base(blocks.cell(block));
        for (number, node) in surface.iter().enumerate() {
            blocks_of
                .entry(base + node.offset)
                .or_default()
                .push((block, number));
        }
    }
    let mut times = vec![f64::INFINITY; lattice.node_count()];
    let mut heap = BinaryHeap::new();
    let offer = |times: &mut Vec<f64>, heap: &mut BinaryHeap<_>, node: usize, time: f64| {
        if time < times[node] {
            times[node] = time;
            heap.push(Reverse((time.to_bits(), node)));
        }
    };
    for block in blocks.around(source) {
        let cell = blocks.cell(block);
        for (number, node) in surface.iter().enumerate() {
            let way = blocks
                .chart()
                .distance(source, lattice.node_position(cell, number));
            let time = way * blocks.slowness_of(block);
            offer(
                &mut times,
                &mut heap,
                lattice.base(cell) + node.offset,
                time,
            );
        }
    }
    while let Some(Reverse((bits, node))) = heap.pop() {
        let time = f64::from_bits(bits);
        if time > times[node] {
            continue;
        }
        for &(block, number) in &blocks_of[&node] {
            let cell = blocks.cell(block);
            let from = lattice.node_position(cell, number);
            for (other, target) in surface.iter().enumerate() {
                let way = blocks
                    .chart()
                    .distance(from, lattice.node_position(cell, other));
                let arrival = time + way * blocks.slowness_of(block);
                offer(
                    &mut times,
                    &mut heap,
                    lattice.base(cell) + target.offset,
                    arrival,
                );
            }
        }
    }
    times
}

fn agree<C: Chart>(blocks: &Blocks<C>, per_edge: usize, random: &mut Random) {
    for lattice in [
        Lattice::new(blocks, per_edge),
        Lattice::uniform(blocks, per_edge),
    ] {
        agree_on(blocks, &lattice, point_inside(blocks, random));
    }
}

fn agree_on<C: Chart>(blocks: &Blocks<C>, lattice: &Lattice, source: Vec3) {
    let expected = dijkstra(blocks, lattice, source);
    let mut field = CoarseField::default();
    CoarseSearch::new(blocks, lattice)
        .run(source, f32::INFINITY, &mut field, &Monitor::default())
        .expect("nobody interrupts");
    for (&got, &expected) in field.times().iter().zip(&expected) {
        if expected.is_finite() {
            let difference = (f64::from(got) - expected).abs();
            assert!(difference <= 1e-5 + 3e-6 * expected, "{got} for {expected}");
        } else {
            assert!(got.is_infinite());
        }
    }
}

#[test]
fn times_equal_dijkstra_in_flat_blocks() {
    let mut random = Random(1);
    for per_edge in 1..=3 {
        let model = rough_model(
            FlatChart,
            [
                edges(6, 0.0, 10.0),
                edges(5, -20.0, 10.0),
                edges(4, 0.0, 10.0),
            ],
            0.3,
            &mut random,
        );
        agree(&model, per_edge, &mut random);
    }
}

#[test]
fn times_equal_dijkstra_with_unequal_spacing() {
    let mut random = Random(2);
    let axes = [6, 5, 5].map(|count| uneven_edges(count, -10.0, 12.0, &mut random));
    let model = rough_model(FlatChart, axes, 0.2, &mut random);
    agree(&model, 2, &mut random);
}

#[test]
fn times_equal_dijkstra_on_the_sphere() {
    let mut random = Random(3);
    let axes = [
        uneven_edges(6, -600.0, 100.0, &mut random),
        uneven_edges(5, 300.0, 100.0, &mut random),
        uneven_edges(5, -5.0, 60.0, &mut random),
    ];
    let model = rough_model(SphereChart::new(6371.0), axes, 0.2, &mut random);
    for per_edge in [2, 3] {
        agree(&model, per_edge, &mut random);
    }
}

#[test]
fn a_search_to_points_has_the_same_times_as_far_as_asked() {
    let mut random = Random(4);
    let axes = [30, 24, 20].map(|count| uneven_edges(count, 0.0, 10.0, &mut random));
    let model = rough_model(FlatChart, axes, 0.2, &mut random);
    let lattice = Lattice::new(&model, 2);
    let search = CoarseSearch::new(&model, &lattice);
    let source = [40.0, 50.0, 30.0];
    let wanted = [[70.0, 60.0, 50.0], [41.0, 90.0, 30.0]];
    let (mut whole, mut part) = (CoarseField::default(), CoarseField::default());
    search
        .run(source, f32::INFINITY, &mut whole, &Monitor::default())
        .expect("nobody interrupts");
    search
        .run_to(source, &wanted, 1.0, &mut part, &Monitor::default())
        .expect("nobody interrupts");
    let least = wanted.map(|point| rayloom_core::vec3::distance(source, point) / 7.2);
    let limit = 1.0 + least[0].max(least[1]) as f32;
    let mut later = 0;
    for (&whole, &part) in whole.times().iter().zip(part.times()) {
        if whole <= limit {
            assert!((whole - part).abs() <= 1e-6 * whole, "{part} for {whole}");
        }
        later += usize::from(part.is_infinite() && whole.is_finite());
    }
    assert!(later > whole.times().len() / 4, "{later} nodes were spared");
}
