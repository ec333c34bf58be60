//! The coarse search beside a plain bucket Dijkstra on the same nodes, on one
//! thread: `cargo bench --bench plain_dijkstra -- NX NY NZ`. Prints the seconds
//! of both, repeat by repeat, and their largest difference of times.

use std::time::Instant;

use rayloom_core::blocks::{Blocks, Cell};
use rayloom_core::frame::FlatChart;
use rayloom_core::lattice::Lattice;
use rayloom_core::monitor::Monitor;
use rayloom_core::search::coarse::{CoarseField, CoarseSearch};
use rayloom_core::vec3::Vec3;

const BLOCK_KM: f64 = 15.0;
const PER_EDGE: usize = 2;
const REPEATS: usize = 3;

/// Nodes in buckets of equal width, each taken once, its links to all nodes of
/// the blocks around it relaxed one after the other.
struct PlainDijkstra<'a> {
    blocks: &'a Blocks<FlatChart>,
    lattice: &'a Lattice,
    /// Lattice sizes along the three axes.
    sizes: [usize; 3],
    /// Distances between all surface nodes of a block (all blocks are equal).
    distances: Vec<f32>,
    /// Surface number of each step triple inside a block.
    numbers: Vec<usize>,
    width_s: f32,
}

impl<'a> PlainDijkstra<'a> {
    fn new(blocks: &'a Blocks<FlatChart>, lattice: &'a Lattice) -> Self {
        let side = PER_EDGE + 1;
        let surface = lattice.surface();
        let spacing = BLOCK_KM / side as f64;
        let mut numbers = vec![usize::MAX; (side + 1).pow(3)];
        for (number, node) in surface.iter().enumerate() {
            let [a, b, c] = node.steps;
            numbers[(a * (side + 1) + b) * (side + 1) + c] = number;
        }
        let mut distances = Vec::new();
        for from in surface {
            distances.extend(surface.iter().map(|to| {
                let squares = (0..3).map(|k| from.steps[k].abs_diff(to.steps[k]).pow(2));
                ((squares.sum::<usize>() as f64).sqrt() * spacing) as f32
            }));
        }
        let fastest = blocks.slowness().iter().copied().fold(1.0, f64::min);
        Self {
            blocks,
            lattice,
            sizes: [0, 1, 2].map(|axis| blocks.size(axis) * side + 1),
            distances,
            numbers,
            // No link is shorter, so that a node's time is final once its bucket is due.
            width_s: (fastest * spacing) as f32,
        }
    }

    fn run(&self, source: Cell, times: &mut Vec<f32>) {
        let side = PER_EDGE + 1;
        let count = self.lattice.surface().len();
        times.clear();
        times.resize(self.lattice.node_count(), f32::INFINITY);
        let mut done = vec![false; times.len()];
        let mut buckets: Vec<Vec<usize>> = vec![vec![self.lattice.corner(source)]];
        times[buckets[0][0]] = 0.0;
        let mut current = 0;
        while current < buckets.len() {
            while let Some(node) = buckets[current].pop() {
                if std::mem::replace(&mut done[node], true) {
                    continue;
                }
                let at = [
                    node / (self.sizes[1] * self.sizes[2]),
                    node / self.sizes[2] % self.sizes[1],
                    node % self.sizes[2],
                ];
                let spans = [0, 1, 2].map(|axis| {
                    let low = at[axis].saturating_sub(1) / side;
                    low..=(at[axis] / side).min(self.blocks.size(axis) - 1)
                });
                for ix in spans[0].clone() {
                    for iy in spans[1].clone() {
                        for iz in spans[2].clone() {
                            let cell = [ix, iy, iz];
                            let [a, b, c] = [0, 1, 2].map(|k| at[k] - cell[k] * side);
                            let number = self.numbers[(a * (side + 1) + b) * (side + 1) + c];
                            let slowness = self.blocks.slowness_of(self.blocks.index(cell)) as f32;
                            let base = self.lattice.base(cell);
                            let row = &self.distances[number * count..][..count];
                            for (target, way) in self.lattice.surface().iter().zip(row) {
                                let place = base + target.offset;
                                let time = times[node] + way * slowness;
                                if time < times[place] {
                                    times[place] = time;
                                    let bucket = (time / self.width_s) as usize;
                                    if bucket >= buckets.len() {
                                        buckets.resize_with(bucket + 1, Vec::new);
                                    }
                                    buckets[bucket].push(place);
                                }
                            }
                        }
                    }
                }
            }
            current += 1;
        }
    }
}

/// Mantle-like velocity with 5 % from block to block.
fn model(shape: Cell) -> Blocks<FlatChart> {
    let edges = shape.map(|count| (0..=count).map(|k| k as f64 * BLOCK_KM).collect());
    let mut state = 41_u64;
    let slowness = (0..shape.iter().product())
        .map(|block: usize| {
            state = state
                .wrapping_mul(6_364_136_223_846_793_005)
                .wrapping_add(1);
            let share = (state >> 40) as f64 / (1_u64 << 24) as f64;
            let depth = (block % shape[2]) as f64 * BLOCK_KM;
            1.0 / ((6.0 + 0.006_25 * depth) * (1.0 + 0.173 * (share - 0.5)))
        })
        .collect();
    Blocks::new(FlatChart, edges, slowness).expect("rising edges and positive slowness")
}

fn main() {
    let given: Vec<usize> = std::env::args()
        .filter_map(|word| word.parse().ok())
        .collect();
    let shape = match given[..] {
        [nx, ny, nz] => [nx, ny, nz],
        _ => [43, 40, 25],
    };
    let blocks = model(shape);
    let lattice = Lattice::uniform(&blocks, PER_EDGE);
    let (plain, own) = (
        PlainDijkstra::new(&blocks, &lattice),
        CoarseSearch::new(&blocks, &lattice),
    );
    let middle = shape.map(|count| count / 2);
    let source: Vec3 = middle.map(|index| index as f64 * BLOCK_KM);
    let (mut times, mut field) = (Vec::new(), CoarseField::default());
    for _ in 0..REPEATS {
        let start = Instant::now();
        plain.run(middle, &mut times);
        let plain_s = start.elapsed().as_secs_f64();
        let start = Instant::now();
        own.run(source, f32::INFINITY, &mut field, &Monitor::default())
            .expect("nobody interrupts");
        let own_s = start.elapsed().as_secs_f64();
        let reached = times.iter().zip(field.times());
        let largest = reached
            .filter(|(time, _)| time.is_finite())
            .map(|(a, b)| (a - b).abs())
            .fold(0.0, f32::max);
        println!("{plain_s:.6} {own_s:.6} {largest:.3e}");
    }
}
