//! One table of distances for all blocks of the same shape: [`BoxSet`].

use std::collections::HashMap;
use std::sync::OnceLock;

use crate::blocks::Blocks;
use crate::frame::Chart;
use crate::search::box_tables::{BoxTables, NodeCounts};
use crate::vec3::norm;

/// Blocks on the sphere whose mean widths agree within this share have one table.
const WIDTH_STEP: f64 = 0.002;

/// The shapes of a model's blocks, taken as boxes of their mean widths; tables
/// are made when first asked for.
#[derive(Debug)]
pub struct BoxSet {
    counts: NodeCounts,
    shape_of: Vec<u32>,
    widths_km: Vec<[f64; 3]>,
    tables: Vec<OnceLock<BoxTables>>,
}

impl BoxSet {
    /// Sorts the blocks of a model by shape.
    pub fn new<C: Chart>(blocks: &Blocks<C>, counts: NodeCounts) -> Self {
        let mut known: HashMap<[i64; 3], u32> = HashMap::new();
        let mut widths_km = Vec::new();
        let shape_of = (0..blocks.count() as u32)
            .map(|block| {
                let widths = mean_widths(blocks, block);
                let key = widths.map(|width| {
                    let place = if C::FLAT {
                        width / 1e-6
                    } else {
                        width.ln() / WIDTH_STEP
                    };
                    place.round() as i64
                });
                *known.entry(key).or_insert_with(|| {
                    widths_km.push(widths);
                    (widths_km.len() - 1) as u32
                })
            })
            .collect();
        Self {
            counts,
            shape_of,
            tables: widths_km.iter().map(|_| OnceLock::new()).collect(),
            widths_km,
        }
    }

    /// The table of a block's shape.
    pub fn table(&self, block: u32) -> &BoxTables {
        let shape = self.shape_of[block as usize] as usize;
        self.tables[shape].get_or_init(|| BoxTables::new(self.counts, self.widths_km[shape]))
    }
}

/// Widths (km) of a block through its middle.
fn mean_widths<C: Chart>(blocks: &Blocks<C>, block: u32) -> [f64; 3] {
    let ranges = [0, 1, 2].map(|axis| blocks.range(block, axis));
    let tangents = blocks
        .chart()
        .tangents(ranges.map(|(low, high)| 0.5 * (low + high)));
    [0, 1, 2].map(|axis| (ranges[axis].1 - ranges[axis].0) * norm(tangents[axis]))
}
