//! Newton's method on the crossing points of one block sequence: [`Newton`].
//!
//! `T = Σ s_i √(|x_{i+1} − x_i|² + ε²) + T_outside(x_0)`, two unknowns per
//! crossing, each kept on its face. The Hessian is block tridiagonal with 2 × 2
//! blocks and factorised by the block form of Thomas's algorithm. Bounds are
//! kept by an active set and projection. The outside wave and the sphere bend so
//! little over a block that their second derivatives are left out; gradients
//! are exact, so only the speed of convergence is touched.

use crate::blocks::{Blocks, face_axes};
use crate::frame::Chart;
use crate::incoming::Incoming;
use crate::path::Path;
use crate::vec3::{Vec3, dot, sub};

type Pair = [f64; 2];
type Matrix = [f64; 4];

/// Relative size of the gradient (against the slowness) that counts as zero.
const GRADIENT_TOLERANCE: f64 = 2e-5;
/// Gain (s) below which the iteration stops.
const GAIN_TOLERANCE_S: f64 = 1e-10;
/// Halvings of a step that does not gain.
const SHORTENINGS: usize = 14;
/// Share of the diagonal added to keep straight rows solvable.
const DAMPING: f64 = 1e-7;

/// Memory of the iteration, reused from call to call.
#[derive(Debug, Default)]
pub struct Newton {
    positions: Vec<Vec3>,
    units: Vec<Vec3>,
    lengths: Vec<f64>,
    tangents: Vec<[Vec3; 2]>,
    bounds: Vec<[Pair; 2]>,
    gradient: Vec<Pair>,
    diagonal: Vec<Matrix>,
    coupling: Vec<Matrix>,
    step: Vec<Pair>,
    trial: Vec<Vec3>,
    trial_positions: Vec<Vec3>,
}

impl Newton {
    /// Moves the free points of `path` to the minimum of the smoothed time. The
    /// first point is free if there is an incoming wave and the point lies on a
    /// face; the last one is always fixed.
    pub fn minimise<C: Chart>(
        &mut self,
        blocks: &Blocks<C>,
        incoming: Option<&dyn Incoming>,
        path: &mut Path,
        smoothing_km: f64,
        iterations: usize,
    ) {
        let incoming = incoming.filter(|_| path.axes[0] < 3);
        let first = usize::from(incoming.is_none());
        if path.points.len() < first + 2 {
            return;
        }
        let problem = Problem {
            blocks,
            incoming,
            first,
            smoothing: smoothing_km * smoothing_km,
        };
        self.set_bounds(&problem, path);
        self.positions.clear();
        self.positions.extend(
            path.points
                .iter()
                .map(|&point| blocks.chart().position(point)),
        );
        let mut time = problem.time(&self.positions, path.points[0], &path.blocks);
        for _ in 0..iterations {
            if self.differentiate(&problem, path) < GRADIENT_TOLERANCE {
                return;
            }
            self.solve();
            match self.advance(&problem, path, time) {
                Some(earlier) if time - earlier > GAIN_TOLERANCE_S => time = earlier,
                _ => return,
            }
        }
    }

    fn set_bounds<C: Chart>(&mut self, problem: &Problem<'_, C>, path: &Path) {
        self.bounds.clear();
        for point in problem.first..path.len() {
            let (u, v) = face_axes(usize::from(path.axes[point]));
            let block = path.blocks[point];
            self.bounds.push([u, v].map(|axis| {
                let (low, high) = problem.blocks.range(block, axis);
                [low, high]
            }));
        }
    }

    /// Fills gradient and Hessian; returns the largest relative gradient of the
    /// variables that are free to move.
    fn differentiate<C: Chart>(&mut self, problem: &Problem<'_, C>, path: &Path) -> f64 {
        self.set_segments(problem, path);
        self.gradient.clear();
        self.diagonal.clear();
        self.coupling.clear();
        let mut largest = 0.0_f64;
        let mut fixed_before = [false; 2];
        for (row, point) in (problem.first..path.len()).enumerate() {
            let mut gradient = self.gradient_of(problem, path, row, point);
            let mut diagonal = self.curvature_of(problem, path, row, point);
            let mut coupling = [0.0; 4];
            if row > 0 {
                coupling = self.coupling_of(problem, path, row, point);
            }
            let (u, v) = face_axes(usize::from(path.axes[point]));
            let at = [path.points[point][u], path.points[point][v]];
            let bounds = self.bounds[row];
            let fixed = [0, 1].map(|k| {
                (at[k] <= bounds[k][0] && gradient[k] > 0.0)
                    || (at[k] >= bounds[k][1] && gradient[k] < 0.0)
            });
            for k in 0..2 {
                if fixed[k] {
                    gradient[k] = 0.0;
                    diagonal[3 * k] = 1.0;
                    diagonal[1] = 0.0;
                    diagonal[2] = 0.0;
                    coupling[2 * k] = 0.0;
                    coupling[2 * k + 1] = 0.0;
                }
                if fixed_before[k] {
                    coupling[k] = 0.0;
                    coupling[k + 2] = 0.0;
                }
                let slowness = problem.blocks.slowness_of(path.blocks[point]);
                largest = largest.max(gradient[k].abs() / slowness);
            }
            fixed_before = fixed;
            self.gradient.push(gradient);
            self.diagonal.push(diagonal);
            self.coupling.push(coupling);
        }
        largest
    }

    fn set_segments<C: Chart>(&mut self, problem: &Problem<'_, C>, path: &Path) {
        self.units.clear();
        self.lengths.clear();
        for pair in self.positions.windows(2) {
            let way = sub(pair[1], pair[0]);
            let length = (dot(way, way) + problem.smoothing).sqrt();
            self.units.push(way.map(|component| component / length));
            self.lengths.push(length);
        }
        self.tangents.clear();
        for point in problem.first..path.len() {
            let (u, v) = face_axes(usize::from(path.axes[point]));
            let tangents = problem.blocks.chart().tangents(path.points[point]);
            self.tangents.push([tangents[u], tangents[v]]);
        }
    }

    fn gradient_of<C: Chart>(
        &self,
        problem: &Problem<'_, C>,
        path: &Path,
        row: usize,
        point: usize,
    ) -> Pair {
        let onward = problem.blocks.slowness_of(path.blocks[point]);
        let mut pull = self.units[point].map(|d| -onward * d);
        if point > 0 {
            let slowness = problem.blocks.slowness_of(path.blocks[point - 1]);
            for (sum, d) in pull.iter_mut().zip(self.units[point - 1]) {
                *sum += slowness * d;
            }
        }
        let mut gradient = self.tangents[row].map(|tangent| dot(tangent, pull));
        if let (0, Some(incoming)) = (point, problem.incoming)
            && let Some(arrival) = incoming.at(path.points[0])
        {
            let (u, v) = face_axes(usize::from(path.axes[0]));
            gradient[0] += arrival.gradient[u];
            gradient[1] += arrival.gradient[v];
        }
        gradient
    }

    fn curvature_of<C: Chart>(
        &self,
        problem: &Problem<'_, C>,
        path: &Path,
        row: usize,
        point: usize,
    ) -> Matrix {
        let [ju, jv] = self.tangents[row];
        let (uu, uv, vv) = (dot(ju, ju), dot(ju, jv), dot(jv, jv));
        let mut sum = [0.0; 4];
        for segment in point.saturating_sub(1)..=point {
            let stiffness =
                problem.blocks.slowness_of(path.blocks[segment]) / self.lengths[segment];
            let (du, dv) = (dot(ju, self.units[segment]), dot(jv, self.units[segment]));
            sum[0] += stiffness * (uu * (1.0 + DAMPING) - du * du);
            sum[1] += stiffness * (uv - du * dv);
            sum[3] += stiffness * (vv * (1.0 + DAMPING) - dv * dv);
        }
        sum[2] = sum[1];
        sum
    }

    /// Second derivatives by this point (rows) and the one before (columns).
    fn coupling_of<C: Chart>(
        &self,
        problem: &Problem<'_, C>,
        path: &Path,
        row: usize,
        point: usize,
    ) -> Matrix {
        let segment = point - 1;
        let unit = self.units[segment];
        let stiffness = problem.blocks.slowness_of(path.blocks[segment]) / self.lengths[segment];
        let mut matrix = [0.0; 4];
        for (k, &here) in self.tangents[row].iter().enumerate() {
            for (l, &before) in self.tangents[row - 1].iter().enumerate() {
                matrix[2 * k + l] =
                    -stiffness * (dot(here, before) - dot(here, unit) * dot(before, unit));
            }
        }
        matrix
    }

    /// Solves Hessian · step = −gradient; overwrites diagonal and gradient.
    fn solve(&mut self) {
        let count = self.gradient.len();
        for row in 0..count {
            if row > 0 {
                let o = self.coupling[row];
                let factor = times(o, self.diagonal[row - 1]);
                let h = &mut self.diagonal[row];
                h[0] -= factor[0] * o[0] + factor[1] * o[1];
                h[1] -= factor[0] * o[2] + factor[1] * o[3];
                h[3] -= factor[2] * o[2] + factor[3] * o[3];
                h[2] = h[1];
                let before = apply(factor, self.gradient[row - 1]);
                self.gradient[row][0] -= before[0];
                self.gradient[row][1] -= before[1];
            }
            self.diagonal[row] = inverse(self.diagonal[row]);
        }
        self.step.resize(count, [0.0; 2]);
        for row in (0..count).rev() {
            let mut right = self.gradient[row].map(|g| -g);
            if row + 1 < count {
                let o = self.coupling[row + 1];
                let next = self.step[row + 1];
                right[0] -= o[0] * next[0] + o[2] * next[1];
                right[1] -= o[1] * next[0] + o[3] * next[1];
            }
            self.step[row] = apply(self.diagonal[row], right);
        }
    }

    /// Takes the longest step that gains; returns the new time, or `None`.
    fn advance<C: Chart>(
        &mut self,
        problem: &Problem<'_, C>,
        path: &mut Path,
        time: f64,
    ) -> Option<f64> {
        let chart = problem.blocks.chart();
        let mut share = 1.0;
        for _ in 0..SHORTENINGS {
            self.trial.clear();
            self.trial.extend_from_slice(&path.points);
            for (row, point) in (problem.first..path.len()).enumerate() {
                let (u, v) = face_axes(usize::from(path.axes[point]));
                for (k, axis) in [u, v].into_iter().enumerate() {
                    let [low, high] = self.bounds[row][k];
                    let moved = self.trial[point][axis] + share * self.step[row][k];
                    self.trial[point][axis] = moved.clamp(low, high);
                }
            }
            self.trial_positions.clear();
            self.trial_positions
                .extend(self.trial.iter().map(|&point| chart.position(point)));
            let earlier = problem.time(&self.trial_positions, self.trial[0], &path.blocks);
            if earlier < time {
                std::mem::swap(&mut path.points, &mut self.trial);
                std::mem::swap(&mut self.positions, &mut self.trial_positions);
                return Some(earlier);
            }
            share *= 0.4;
        }
        None
    }
}

/// What stays the same during one minimisation.
struct Problem<'a, C> {
    blocks: &'a Blocks<C>,
    incoming: Option<&'a dyn Incoming>,
    first: usize,
    smoothing: f64,
}

impl<C: Chart> Problem<'_, C> {
    fn time(&self, positions: &[Vec3], entry: Vec3, sequence: &[u32]) -> f64 {
        let outside = self.incoming.map_or(0.0, |incoming| {
            incoming
                .at(entry)
                .map_or(f64::INFINITY, |arrival| arrival.time_s)
        });
        positions
            .windows(2)
            .zip(sequence)
            .map(|(pair, &block)| {
                let way = sub(pair[1], pair[0]);
                self.blocks.slowness_of(block) * (dot(way, way) + self.smoothing).sqrt()
            })
            .sum::<f64>()
            + outside
    }
}

fn times(a: Matrix, b: Matrix) -> Matrix {
    [
        a[0] * b[0] + a[1] * b[2],
        a[0] * b[1] + a[1] * b[3],
        a[2] * b[0] + a[3] * b[2],
        a[2] * b[1] + a[3] * b[3],
    ]
}

fn apply(a: Matrix, x: Pair) -> Pair {
    [a[0] * x[0] + a[1] * x[1], a[2] * x[0] + a[3] * x[1]]
}

fn inverse(a: Matrix) -> Matrix {
    let determinant = a[0] * a[3] - a[1] * a[2];
    let scale = if determinant.abs() < 1e-300 {
        1e300
    } else {
        1.0 / determinant
    };
    [a[3] * scale, -a[1] * scale, -a[2] * scale, a[0] * scale]
}
