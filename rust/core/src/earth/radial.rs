//! The velocity of one wave type as a function of radius: [`RadialModel`].

use super::shell::{Shell, Travel};
use crate::error::{CoreError, Result};

/// How far a model continues above sea level, with its topmost velocity, km.
pub const HIGHEST_KM: f64 = 12.0;

/// Which of the two velocities counts at a discontinuity.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Side {
    /// The velocity just above.
    Above,
    /// The velocity just below.
    Below,
}

/// Velocity linear in radius between tabulated depths; a depth given twice is a
/// discontinuity. Above sea level the topmost velocity continues for
/// [`HIGHEST_KM`].
#[derive(Debug, Clone, PartialEq)]
pub struct RadialModel {
    radius_km: f64,
    /// From the top down.
    shells: Vec<Shell>,
}

/// How a ray that starts downward ends.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Ending {
    /// It turns in the shell of this index.
    Turned(usize),
    /// It reaches the lower limit, in the shell of this index.
    Reached(usize),
    /// It cannot leave downward, or meets a discontinuity that turns it back.
    Blocked,
}

impl RadialModel {
    /// Takes a table of depths (km, from 0 down) and velocities (km/s) of a
    /// sphere of `radius_km`.
    ///
    /// # Errors
    /// [`CoreError::Invalid`] if the arrays differ in length, hold fewer than
    /// two rows, do not start at depth 0, fall in depth, repeat a depth more
    /// than once, pass the centre, or hold a velocity that is not positive.
    pub fn new(depth_km: &[f64], velocity_km_s: &[f64], radius_km: f64) -> Result<Self> {
        check_table(depth_km, velocity_km_s, radius_km)?;
        let top = (radius_km + HIGHEST_KM, velocity_km_s[0]);
        let mut shells = vec![Shell::new((radius_km, velocity_km_s[0]), top)];
        for row in 1..depth_km.len() {
            if depth_km[row] > depth_km[row - 1] {
                shells.push(Shell::new(
                    (radius_km - depth_km[row], velocity_km_s[row]),
                    (radius_km - depth_km[row - 1], velocity_km_s[row - 1]),
                ));
            }
        }
        Ok(Self { radius_km, shells })
    }

    /// The part above a depth, which must lie inside the model.
    pub(super) fn above(&self, depth_km: f64) -> Self {
        let limit_km = self.radius_km - depth_km;
        let last = self.shell_index(limit_km, Side::Above);
        let mut shells = self.shells[..=last].to_vec();
        shells[last].bottom_km = shells[last].bottom_km.max(limit_km);
        Self {
            radius_km: self.radius_km,
            shells,
        }
    }

    /// Radius of the sphere at sea level, km.
    #[must_use]
    pub fn radius_km(&self) -> f64 {
        self.radius_km
    }

    /// The shells from the top down; the first lies above sea level.
    #[must_use]
    pub fn shells(&self) -> &[Shell] {
        &self.shells
    }

    /// Largest depth of the model, km.
    #[must_use]
    pub fn bottom_depth_km(&self) -> f64 {
        self.radius_km - self.bottom_km()
    }

    /// Radius of the model's bottom, km.
    pub(super) fn bottom_km(&self) -> f64 {
        self.shells[self.shells.len() - 1].bottom_km
    }

    /// Index of the shell that holds a radius; at a border, the shell on `side`.
    /// Radii outside the model belong to its first or last shell.
    #[must_use]
    pub fn shell_index(&self, radius_km: f64, side: Side) -> usize {
        let index = match side {
            Side::Below => self
                .shells
                .partition_point(|shell| shell.bottom_km >= radius_km),
            Side::Above => self
                .shells
                .partition_point(|shell| shell.bottom_km > radius_km),
        };
        index.min(self.shells.len() - 1)
    }

    /// Velocity at a depth, km/s.
    #[must_use]
    pub fn velocity_km_s(&self, depth_km: f64, side: Side) -> f64 {
        let radius_km = self.radius_km - depth_km;
        self.shells[self.shell_index(radius_km, side)].velocity_km_s(radius_km)
    }

    /// Velocities at many depths, km/s.
    ///
    /// # Errors
    /// [`CoreError::Invalid`] unless every depth lies inside the model.
    pub fn velocities_km_s(&self, depth_km: &[f64], side: Side) -> Result<Vec<f64>> {
        depth_km
            .iter()
            .map(|&depth_km| {
                self.check_depth("depth", depth_km)?;
                Ok(self.velocity_km_s(depth_km, side))
            })
            .collect()
    }

    /// Mean of 1/v between each pair of neighbouring depths, exact, s/km.
    ///
    /// # Errors
    /// [`CoreError::Invalid`] unless the depths rise and lie inside the model.
    pub fn mean_slowness_s_per_km(&self, depth_edges_km: &[f64]) -> Result<Vec<f64>> {
        for &edge_km in depth_edges_km {
            self.check_depth("depth edge", edge_km)?;
        }
        depth_edges_km
            .windows(2)
            .map(|pair| {
                if pair[0] >= pair[1] {
                    return Err(CoreError::invalid(
                        "depth edges",
                        "rising depths",
                        format!("{} km before {} km", pair[0], pair[1]),
                    ));
                }
                let (high_km, low_km) = (self.radius_km - pair[0], self.radius_km - pair[1]);
                let time_s: f64 = self
                    .shells
                    .iter()
                    .map(|shell| shell.vertical_s(low_km, high_km))
                    .sum();
                Ok(time_s / (high_km - low_km))
            })
            .collect()
    }

    /// # Errors
    /// [`CoreError::Invalid`] unless the depth lies inside the model.
    pub(super) fn check_depth(&self, what: &str, depth_km: f64) -> Result<()> {
        let bottom_km = self.bottom_depth_km();
        if (-HIGHEST_KM..=bottom_km).contains(&depth_km) {
            return Ok(());
        }
        Err(CoreError::invalid(
            what,
            format!("a depth between {} and {bottom_km} km", -HIGHEST_KM),
            format!("{depth_km} km"),
        ))
    }

    /// Follows a ray down from `high_km` to its turning point or to `low_km`.
    pub(super) fn descend(
        &self,
        ray_parameter: f64,
        high_km: f64,
        low_km: f64,
    ) -> (Travel, Ending) {
        let mut travel = Travel::default();
        let first = self.shell_index(high_km, Side::Below);
        for (index, shell) in self.shells.iter().enumerate().skip(first) {
            let high = shell.top_km.min(high_km);
            let low = shell.bottom_km.max(low_km);
            if shell.clearance_km(ray_parameter, high) <= 0.0 {
                return (travel, Ending::Blocked);
            }
            travel += shell.cross(ray_parameter, low, high);
            if shell.clearance_km(ray_parameter, low) <= 0.0 {
                return (travel, Ending::Turned(index));
            }
            if low <= low_km {
                return (travel, Ending::Reached(index));
            }
        }
        (travel, Ending::Blocked)
    }

    /// Follows a ray up from `low_km`, or from its turning point above it, in
    /// the shell `first`, and writes the travel to each of the rising radii
    /// `ends_km`; [`Travel::NONE`] where the ray does not come by.
    pub(super) fn ascend(
        &self,
        ray_parameter: f64,
        (first, low_km): (usize, f64),
        ends_km: &[f64],
        out: &mut [Travel],
    ) {
        out.fill(Travel::NONE);
        let mut next = ends_km.partition_point(|&end| end < low_km);
        let mut travel = Travel::default();
        let mut low = low_km;
        for (index, shell) in self.shells[..=first].iter().enumerate().rev() {
            let enters = index == first || shell.clearance_km(ray_parameter, low) > 0.0;
            while enters && next < ends_km.len() && ends_km[next] <= shell.top_km {
                if shell.clearance_km(ray_parameter, ends_km[next]) > 0.0 {
                    travel += shell.cross(ray_parameter, low, ends_km[next]);
                    out[next] = travel;
                    low = ends_km[next];
                }
                next += 1;
            }
            let leaves = shell.clearance_km(ray_parameter, shell.top_km) > 0.0;
            if next == ends_km.len() || !enters || !leaves {
                return;
            }
            travel += shell.cross(ray_parameter, low, shell.top_km);
            low = shell.top_km;
        }
    }
}

/// False also for a NaN.
fn rises(before: f64, after: f64) -> bool {
    after >= before
}

fn check_table(depth_km: &[f64], velocity_km_s: &[f64], radius_km: f64) -> Result<()> {
    let rows = depth_km.len();
    if rows < 2 || velocity_km_s.len() != rows {
        return Err(CoreError::invalid(
            "model table",
            "two or more depths and as many velocities",
            format!("{rows} depths and {} velocities", velocity_km_s.len()),
        ));
    }
    if depth_km[0] != 0.0 {
        return Err(CoreError::invalid(
            "first depth of the model",
            "0 km",
            format!("{} km", depth_km[0]),
        ));
    }
    if let Some(row) = (1..rows).find(|&row| !rises(depth_km[row - 1], depth_km[row])) {
        return Err(CoreError::invalid(
            format!("depth in row {}", row + 1),
            format!("{} km or more", depth_km[row - 1]),
            format!("{} km", depth_km[row]),
        ));
    }
    if let Some(row) = (2..rows).find(|&row| depth_km[row] <= depth_km[row - 2]) {
        return Err(CoreError::invalid(
            format!("depth in row {}", row + 1),
            "the same depth at most twice",
            format!("{} km three times", depth_km[row]),
        ));
    }
    if !(depth_km[rows - 1] <= radius_km && depth_km[rows - 1] > 0.0) {
        return Err(CoreError::invalid(
            "last depth of the model",
            format!("more than 0 and at most the radius of {radius_km} km"),
            format!("{} km", depth_km[rows - 1]),
        ));
    }
    let wrong = velocity_km_s
        .iter()
        .position(|v| !(v.is_finite() && *v > 0.0));
    wrong.map_or(Ok(()), |row| {
        Err(CoreError::invalid(
            format!("velocity in row {}", row + 1),
            "a positive number of km/s",
            velocity_km_s[row].to_string(),
        ))
    })
}
