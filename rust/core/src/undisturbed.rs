//! The ray that an incoming wave would take without the model's anomalies:
//! [`undisturbed_ray`], followed from the receiver down, and the time it needs,
//! [`undisturbed_leg`].

use crate::blocks::Blocks;
use crate::fermat::straight_path;
use crate::frame::Chart;
use crate::incoming::Incoming;
use crate::path::Path;
use crate::vec3::{Vec3, dot, lerp};

/// Steps of the integral for the undisturbed time.
const LEG_STEPS: usize = 24;
/// A layer thinner than this (km) below the receiver is passed over.
const THINNEST_KM: f64 = 1e-6;
/// Wave fronts closer to vertical than this (km per km of depth) are not followed.
const STEEPEST_OFFSET: f64 = 20.0;

/// Time (s) of the undisturbed wave from the depth `base` (km) up to a
/// receiver, along a ray of the slowness vector found below the receiver:
/// dt/dz = |∇T|² / |∂T/∂z|.
pub fn undisturbed_leg(incoming: &dyn Incoming, receiver: Vec3, base: f64) -> Option<f64> {
    let step = (base - receiver[2]) / LEG_STEPS as f64;
    let mut time = 0.0;
    for k in 0..LEG_STEPS {
        let depth = receiver[2] + step * (k as f64 + 0.5);
        let gradient = incoming.at([receiver[0], receiver[1], depth])?.gradient;
        time += step * dot(gradient, gradient) / gradient[2].abs();
    }
    Some(time)
}

/// The ray normal to the incoming wave's fronts, from where it enters the model
/// to `receiver` (grid coordinates, km): straight within each layer of blocks,
/// its direction found by the midpoint rule. `None` where the wave does not come
/// or a straight piece cannot be cut into blocks.
pub fn undisturbed_ray<C: Chart>(
    blocks: &Blocks<C>,
    incoming: &dyn Incoming,
    receiver: Vec3,
) -> Option<Path> {
    let depths = blocks.edges(2);
    let first = depths.partition_point(|&depth| depth <= receiver[2] + THINNEST_KM);
    let mut block = *blocks
        .around(receiver)
        .iter()
        .find(|&&block| blocks.cell(block)[2] + 1 == first)?;
    let mut path = Path::default();
    path.start(receiver, crate::path::FREE);
    let mut piece = Path::default();
    for &depth in &depths[first..] {
        let from = path.points[path.len()];
        let (to, axis) = within(blocks, from, step_down(blocks, incoming, from, depth)?);
        if !straight_path(blocks, block, from, to, &mut piece) {
            return None;
        }
        for segment in 0..piece.len() {
            path.push(
                piece.blocks[segment],
                piece.points[segment + 1],
                piece.axes[segment + 1],
            );
        }
        let last = path.len();
        path.axes[last] = axis as u8;
        if axis != 2 {
            break;
        }
        block = match blocks.neighbour(path.blocks[last - 1], 5) {
            Some(below) => below,
            None => break,
        };
    }
    path.reverse();
    (!path.is_empty()).then_some(path)
}

/// Where the ray through `from` passes a depth (km) further down.
fn step_down<C: Chart>(
    blocks: &Blocks<C>,
    incoming: &dyn Incoming,
    from: Vec3,
    depth: f64,
) -> Option<Vec3> {
    let middle = 0.5 * (from[2] + depth);
    let half = middle - from[2];
    let near = offset_per_depth(blocks, incoming, [from[0], from[1], middle])?;
    let at = [from[0] + half * near[0], from[1] + half * near[1], middle];
    let offset = offset_per_depth(blocks, incoming, at).unwrap_or(near);
    let step = depth - from[2];
    Some([
        from[0] + step * offset[0],
        from[1] + step * offset[1],
        depth,
    ])
}

/// Change of x and y (km of grid coordinate) with depth along the ray.
fn offset_per_depth<C: Chart>(
    blocks: &Blocks<C>,
    incoming: &dyn Incoming,
    at: Vec3,
) -> Option<[f64; 2]> {
    let gradient = incoming.at(at)?.gradient;
    let tangents = blocks.chart().tangents(at);
    let along = [0, 1, 2].map(|axis| gradient[axis] / dot(tangents[axis], tangents[axis]));
    let offset = [along[0] / along[2], along[1] / along[2]];
    offset
        .iter()
        .all(|slope| slope.abs() < STEEPEST_OFFSET)
        .then_some(offset)
}

/// The end of a step, or where it leaves through a side of the model, and the
/// axis of the face it lies on.
fn within<C: Chart>(blocks: &Blocks<C>, from: Vec3, to: Vec3) -> (Vec3, usize) {
    let mut best = (1.0, 2, to[2]);
    for axis in 0..2 {
        let edges = blocks.edges(axis);
        for side in [edges[0], edges[edges.len() - 1]] {
            let share = (side - from[axis]) / (to[axis] - from[axis]);
            let outside = (to[axis] - side) * (side - from[axis]) > 0.0;
            if outside && share < best.0 {
                best = (share, axis, side);
            }
        }
    }
    let mut end = lerp(from, to, best.0);
    end[best.1] = best.2;
    (end, best.1)
}
