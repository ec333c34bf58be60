//! How finely to search and how hard to refine: [`Quality`].

use crate::blocks::Blocks;
use crate::fermat::Effort;
use crate::frame::Chart;
use crate::lattice::Lattice;
use crate::search::box_tables::{MOST_NODES, NodeCounts};

/// Added to the slack of a fine search that found nothing (block transits).
const RETRY_SLACK: f64 = 0.1;
/// Flatness beyond which the coarse graph gets more nodes.
const FLAT_BLOCKS: f64 = 1.4;
/// Fewest nodes along an edge of the fine graph.
const FEWEST_NODES: f64 = 3.0;
/// Rows of eight nodes fill a vector; fewer than this do not repay a second one.
const WORTH_TWO_VECTORS: f64 = 11.0;

/// How finely to search and how hard to refine.
#[derive(Debug, Clone, Copy)]
pub struct Quality {
    /// Nodes inside each block edge of the coarse graph (and squared in each
    /// face).
    pub coarse_nodes: usize,
    /// Whether every edge carries just that many, however long it is.
    pub uniform_nodes: bool,
    /// Nodes along each edge of a cube in the fine graph, at the same spacing in
    /// other blocks; 0 leaves the fine search out.
    pub fine_nodes: usize,
    /// Relative excess of the fine graph's times over true ones, in cubes; it
    /// grows with the root of the blocks' flatness and the square of the spacing.
    pub fine_bias: f64,
    /// How much later than the present ray a fine path may be, as a share of the
    /// mean time through a block.
    pub slack: f64,
    /// The same slack around a known ray of a similar model.
    pub slack_again: f64,
    /// Refinement of that ray if the fine search finds nothing earlier.
    pub again: Effort,
    /// Refinement before the fine search.
    pub first: Effort,
    /// Refinement after the fine search.
    pub last: Effort,
}

impl Quality {
    /// The everyday level.
    #[must_use]
    pub fn standard() -> Self {
        Self {
            coarse_nodes: 2,
            uniform_nodes: false,
            fine_nodes: 8,
            fine_bias: 0.0033,
            slack: 0.12,
            slack_again: 0.03,
            again: Effort {
                chord_rounds: 0,
                flip_rounds: 1,
                flip_patience: 0.02,
            },
            first: effort(2, 0),
            last: effort(2, 10),
        }
    }

    /// Less than half of the errors, at two to three times the cost.
    #[must_use]
    pub fn thorough() -> Self {
        Self {
            coarse_nodes: 3,
            uniform_nodes: false,
            fine_nodes: 12,
            fine_bias: 0.0016,
            slack: 0.08,
            slack_again: 0.02,
            again: Effort {
                chord_rounds: 0,
                flip_rounds: 1,
                flip_patience: 0.02,
            },
            first: effort(2, 4),
            last: effort(3, 20),
        }
    }
}

impl Quality {
    /// The same level for a given model: flat blocks need more nodes on the coarse
    /// graph for the same error.
    #[must_use]
    pub fn suited_to<C: Chart>(mut self, blocks: &Blocks<C>) -> Self {
        if blocks.flatness() > FLAT_BLOCKS {
            self.coarse_nodes += usize::from(!self.uniform_nodes);
        }
        self
    }

    /// Slack of the fine search, and that of the second try if it finds nothing.
    pub(crate) fn slacks(&self) -> [f64; 2] {
        [self.slack, self.slack + RETRY_SLACK]
    }

    /// The fine graph's nodes in a model, equally spaced along all axes as far as
    /// their numbers allow, and the excess of its times.
    pub(crate) fn fine_graph<C: Chart>(&self, blocks: &Blocks<C>) -> (NodeCounts, f64) {
        let wanted = blocks.mean_width_km() / (self.fine_nodes.max(2) - 1) as f64;
        let widths = [0, 1, 2].map(|axis| blocks.mean_width_along(axis));
        let counts = widths.map(|width| {
            let count = (width / wanted).round() + 1.0;
            let count = if count > 8.0 && count < WORTH_TWO_VECTORS {
                8.0
            } else {
                count
            };
            count.clamp(FEWEST_NODES, MOST_NODES as f64)
        });
        let widest = (0..3)
            .map(|axis| widths[axis] / (counts[axis] - 1.0))
            .fold(wanted, f64::max);
        let bias = self.fine_bias * blocks.flatness().sqrt() * (widest / wanted).powi(2);
        (NodeCounts::new(counts.map(|count| count as usize)), bias)
    }

    /// The coarse graph's nodes in a model.
    #[must_use]
    pub fn lattice<C: Chart>(&self, blocks: &Blocks<C>) -> Lattice {
        if self.uniform_nodes {
            Lattice::uniform(blocks, self.coarse_nodes)
        } else {
            Lattice::new(blocks, self.coarse_nodes)
        }
    }
}

fn effort(chord_rounds: usize, flip_rounds: usize) -> Effort {
    Effort {
        chord_rounds,
        flip_rounds,
        flip_patience: 0.16,
    }
}
