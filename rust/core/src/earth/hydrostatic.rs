//! The ellipticity of a rotating fluid Earth: [`EllipticityProfile`].

use std::f64::consts::PI;

use super::shell::{GAUSS_NODES, GAUSS_WEIGHTS};
use crate::error::{CoreError, Result};

/// Constant of gravitation, m³/(kg s²) (CODATA 2018).
const GRAVITATION: f64 = 6.6743e-11;

/// Angular velocity of the Earth, rad/s (IERS Conventions 2010, table 1.2).
const ROTATION_PER_S: f64 = 7.292_115e-5;

/// Spacing of the profile, km.
const STEP_KM: f64 = 1.0;

/// Ellipticity of the surfaces of equal density of a rotating fluid Earth.
#[derive(Debug, Clone, PartialEq)]
pub struct EllipticityProfile {
    step_km: f64,
    /// From the centre to the surface.
    values: Vec<f64>,
}

impl EllipticityProfile {
    /// Hydrostatic ellipticity by Radau's approximation to Clairaut's equation
    /// (Radau 1885; Bullen 1975, chapter 4): with the parameter
    /// η = 25/4 (1 − ∫ρ r⁴ / (r² ∫ρ r²))² − 1, d ln ε/d ln r = η, and at the
    /// surface ε = (5/2) ω² a³/(G M) / (η + 2).
    ///
    /// Depths in km from 0 to the centre, densities in g/cm³.
    ///
    /// # Errors
    /// [`CoreError::Invalid`] if the table does not reach the centre or holds a
    /// density that is not positive.
    pub fn hydrostatic(depth_km: &[f64], density_g_cm3: &[f64], radius_km: f64) -> Result<Self> {
        check_density(depth_km, density_g_cm3, radius_km)?;
        let steps = (radius_km / STEP_KM).round().max(2.0);
        let step_km = radius_km / steps;
        let radii_km: Vec<f64> = (0..=steps as usize).map(|i| i as f64 * step_km).collect();
        let moments = moments(depth_km, density_g_cm3, radius_km, &radii_km);
        let growth: Vec<f64> = radii_km
            .iter()
            .zip(&moments)
            .map(|(&r, &[second, fourth])| {
                if r > 0.0 {
                    (6.25 * (1.0 - fourth / (r * r * second)).powi(2) - 1.0) / r
                } else {
                    0.0
                }
            })
            .collect();
        let last = radii_km.len() - 1;
        let mut values = vec![0.0; last + 1];
        values[last] = surface_value(moments[last][0], growth[last] * radius_km, radius_km);
        for i in (0..last).rev() {
            let rise = 0.5 * step_km * (growth[i] + growth[i + 1]);
            values[i] = values[i + 1] * (-rise).exp();
        }
        Ok(Self { step_km, values })
    }

    /// Ellipticity at many radii.
    #[must_use]
    pub fn at_all(&self, radius_km: &[f64]) -> Vec<f64> {
        radius_km
            .iter()
            .map(|&radius_km| self.at(radius_km))
            .collect()
    }

    /// Ellipticity at a radius; above sea level that of the surface.
    #[must_use]
    pub fn at(&self, radius_km: f64) -> f64 {
        let last = self.values.len() - 1;
        let position = (radius_km / self.step_km).clamp(0.0, last as f64);
        let index = (position as usize).min(last - 1);
        let fraction = position - index as f64;
        self.values[index] * (1.0 - fraction) + self.values[index + 1] * fraction
    }
}

fn check_density(depth_km: &[f64], density_g_cm3: &[f64], radius_km: f64) -> Result<()> {
    let rows = depth_km.len();
    let reaches = rows > 1 && (depth_km[rows - 1] - radius_km).abs() < 1e-6;
    if !reaches || density_g_cm3.len() != rows {
        return Err(CoreError::invalid(
            "density table",
            format!("as many densities as depths, down to {radius_km} km"),
            format!("{} densities for {rows} depths", density_g_cm3.len()),
        ));
    }
    let wrong = density_g_cm3
        .iter()
        .position(|v| !(v.is_finite() && *v > 0.0));
    wrong.map_or(Ok(()), |row| {
        Err(CoreError::invalid(
            format!("density in row {}", row + 1),
            "a positive number of g/cm³",
            density_g_cm3[row].to_string(),
        ))
    })
}

/// ε at the surface from ∫ρ r² in g/cm³ km³ and Radau's parameter.
fn surface_value(second_moment: f64, radau: f64, radius_km: f64) -> f64 {
    // 1 g/cm³ km³ = 1e12 kg.
    let mass_kg = 4.0 * PI * second_moment * 1e12;
    let radius_m = radius_km * 1e3;
    let centrifugal = ROTATION_PER_S.powi(2) * radius_m.powi(3) / (GRAVITATION * mass_kg);
    2.5 * centrifugal / (radau + 2.0)
}

/// ∫ρ r² dr and ∫ρ r⁴ dr from the centre to each of the rising radii, density
/// linear in each layer.
fn moments(depth_km: &[f64], density: &[f64], radius_km: f64, radii_km: &[f64]) -> Vec<[f64; 2]> {
    let between = |low: f64, high: f64| {
        let mut sum = [0.0; 2];
        for row in 1..depth_km.len() {
            let (bottom, top) = (radius_km - depth_km[row], radius_km - depth_km[row - 1]);
            let (a, b) = (bottom.max(low), top.min(high));
            if b <= a {
                continue;
            }
            let slope = (density[row - 1] - density[row]) / (top - bottom);
            // Exact: the integrands are polynomials of degree 3 and 5.
            for (node, weight) in GAUSS_NODES.iter().zip(GAUSS_WEIGHTS) {
                let r = a + (b - a) * node;
                let part = weight * (b - a) * (density[row] + slope * (r - bottom)) * r * r;
                sum[0] += part;
                sum[1] += part * r * r;
            }
        }
        sum
    };
    let mut total = [0.0; 2];
    let mut out = vec![total];
    for pair in radii_km.windows(2) {
        let part = between(pair[0], pair[1]);
        total = [total[0] + part[0], total[1] + part[1]];
        out.push(total);
    }
    out
}
