//! Both wave types of a whole Earth: [`LayeredEarth`].

use super::phase::{Anchor, Leg, Phase, Wave};
use super::radial::RadialModel;
use super::route::{Route, Span};
use crate::error::{CoreError, Result};

/// A spherical Earth with a solid mantle over a fluid core, which may hold a
/// solid inner core.
#[derive(Debug, Clone, PartialEq)]
pub struct LayeredEarth {
    compressional: RadialModel,
    shear: RadialModel,
    core_depth_km: f64,
    /// Where the fluid core ends: at the inner core, or at the centre.
    fluid_bottom_km: f64,
}

impl LayeredEarth {
    /// Takes a table of depths (km, from 0 to the centre), of P velocities and
    /// of S velocities (km/s), these 0 in the fluid core.
    ///
    /// # Errors
    /// [`CoreError::Invalid`] if a column cannot be a [`RadialModel`], the
    /// lengths differ, or the S velocity vanishes nowhere or not at a
    /// discontinuity.
    pub fn new(
        depth_km: &[f64],
        compressional_km_s: &[f64],
        shear_km_s: &[f64],
        radius_km: f64,
    ) -> Result<Self> {
        let compressional = RadialModel::new(depth_km, compressional_km_s, radius_km)?;
        let core = shear_km_s.iter().position(|v| *v <= 0.0).unwrap_or(0);
        if core < 2 || depth_km[core] > depth_km[core - 1] || shear_km_s.len() != depth_km.len() {
            return Err(CoreError::invalid(
                "S velocities",
                "a solid mantle above a discontinuity where the fluid core begins with 0 km/s",
                "no such depth",
            ));
        }
        let fluid = shear_km_s[core..].iter().take_while(|v| **v <= 0.0).count();
        Ok(Self {
            compressional,
            shear: RadialModel::new(&depth_km[..core], &shear_km_s[..core], radius_km)?,
            core_depth_km: depth_km[core],
            fluid_bottom_km: depth_km[core + fluid - 1],
        })
    }

    /// Radius at sea level, km.
    #[must_use]
    pub fn radius_km(&self) -> f64 {
        self.compressional.radius_km()
    }

    /// Depth of the core, km.
    #[must_use]
    pub fn core_depth_km(&self) -> f64 {
        self.core_depth_km
    }

    /// The model of one wave type: P to the centre, S to the core.
    #[must_use]
    pub fn model(&self, wave: Wave) -> &RadialModel {
        match wave {
            Wave::P => &self.compressional,
            Wave::S => &self.shear,
        }
    }

    /// The model of one wave type down to the core.
    #[must_use]
    pub fn mantle(&self, wave: Wave) -> RadialModel {
        self.model(wave).above(self.core_depth_km)
    }

    /// A phase from one source depth, ready to be followed.
    pub(super) fn route(&self, phase: &Phase, source_depth_km: f64) -> Result<Route<'_>> {
        self.shear.check_depth("source depth", source_depth_km)?;
        let (last, others) = phase
            .legs
            .split_last()
            .ok_or_else(|| CoreError::invalid("phase", "one leg or more", "none"))?;
        let last = self.span(*last, source_depth_km);
        Ok(Route {
            fixed: others
                .iter()
                .map(|&leg| self.span(leg, source_depth_km))
                .collect(),
            last,
            grazing_s: phase.diffracts.then(|| last.grazing_s()),
        })
    }

    fn span(&self, leg: Leg, source_depth_km: f64) -> Span<'_> {
        let model = self.model(leg.wave);
        let radius_km = |anchor: Anchor| match anchor {
            Anchor::Surface => self.radius_km(),
            Anchor::Source => self.radius_km() - source_depth_km,
            Anchor::Receiver => model.shells()[0].top_km,
            Anchor::CoreTop => self.radius_km() - self.core_depth_km,
            Anchor::InnerCoreTop => self.radius_km() - self.fluid_bottom_km,
            Anchor::Centre => 0.0,
        };
        Span {
            model,
            upper_km: radius_km(leg.upper),
            lower_km: radius_km(leg.lower),
            turns: leg.turns,
            rises: leg.rises,
        }
    }
}
