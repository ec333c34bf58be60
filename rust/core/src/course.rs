//! From a poly-line back to a [`Path`]: which blocks it runs through.

use crate::blocks::{Blocks, Cell};
use crate::frame::Chart;
use crate::path::{FREE, Path};
use crate::vec3::Vec3;

/// Distance (km) from an edge within which the middle of a segment may belong to
/// either side, and below which a segment has no length.
const ON_EDGE_KM: f64 = 1e-5;

/// Distance (km) within which a crossing is moved onto the planes it crosses.
const NEAR_PLANE_KM: f64 = 1e-3;

/// The path along a poly-line (grid coordinates, km) whose segments each stay in
/// one block, from its first point to its last. A segment along a face or an
/// edge takes the fastest of the blocks around; blocks that only share an edge
/// or a corner are joined by segments without length. `None` if the segments do
/// not follow on each other in these blocks.
#[must_use]
pub fn path_along<C: Chart>(blocks: &Blocks<C>, points: &[Vec3]) -> Option<Path> {
    let (&first, &last) = (points.first()?, points.last()?);
    let mut path = Path::default();
    path.start(first, FREE);
    for ends in points.windows(2) {
        let step = [0, 1, 2].map(|axis| ends[1][axis] - ends[0][axis]);
        if step.iter().all(|way| way.abs() <= ON_EDGE_KM) {
            continue;
        }
        let block = fastest_at(blocks, [0, 1, 2].map(|k| ends[0][k] + 0.5 * step[k]))?;
        if path.blocks.last() == Some(&block) {
            path.drop_last();
        } else if !path.is_empty() {
            put_on_common_planes(blocks, &mut path, block);
            path.step_into(blocks, block).then_some(())?;
        }
        path.push(block, ends[1], FREE);
    }
    *path.points.last_mut()? = last;
    (!path.is_empty()).then_some(path)
}

/// The fastest block that holds a point to within [`ON_EDGE_KM`].
fn fastest_at<C: Chart>(blocks: &Blocks<C>, point: Vec3) -> Option<u32> {
    let spans = [0, 1, 2].map(|axis| {
        let edges = blocks.edges(axis);
        let inner = &edges[1..edges.len() - 1];
        let below = inner.partition_point(|&edge| edge < point[axis] - ON_EDGE_KM);
        below..=inner.partition_point(|&edge| edge <= point[axis] + ON_EDGE_KM)
    });
    let [xs, ys, zs] = spans;
    let cells = xs.flat_map(|ix| {
        let zs = zs.clone();
        ys.clone()
            .flat_map(move |iy| zs.clone().map(move |iz| [ix, iy, iz]))
    });
    cells
        .map(|cell: Cell| blocks.index(cell))
        .min_by(|&a, &b| blocks.slowness_of(a).total_cmp(&blocks.slowness_of(b)))
}

/// Moves the last point onto the planes between the last block and `next`, if
/// it lies near them.
fn put_on_common_planes<C: Chart>(blocks: &Blocks<C>, path: &mut Path, next: u32) {
    let (Some(&from), Some(point)) = (path.blocks.last(), path.points.last_mut()) else {
        return;
    };
    let (here, there) = (blocks.cell(from), blocks.cell(next));
    for axis in 0..3 {
        if here[axis] == there[axis] {
            continue;
        }
        let plane = blocks.edges(axis)[here[axis].max(there[axis])];
        if (point[axis] - plane).abs() <= NEAR_PLANE_KM {
            point[axis] = plane;
        }
    }
}
