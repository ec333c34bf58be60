//! The way of a phase from one source depth to any receiver: [`Route`].

use super::radial::{Ending, RadialModel, Side};
use super::shell::Travel;

/// Distance between a ray parameter and the critical one beside it, relative, so
/// that it falls on the intended side.
pub(super) const NUDGE: f64 = 1e-13;

/// A stretch of a ray between two radii, in the model of one wave type.
#[derive(Debug, Clone, Copy)]
pub(super) struct Span<'a> {
    pub(super) model: &'a RadialModel,
    pub(super) upper_km: f64,
    /// What the ray reaches, or must not reach if it turns.
    pub(super) lower_km: f64,
    pub(super) turns: bool,
    pub(super) rises: bool,
}

/// All stretches of a phase: those that do not depend on the receiver, and the
/// last, which rises to it.
#[derive(Debug, Clone)]
pub(super) struct Route<'a> {
    pub(super) fixed: Vec<Span<'a>>,
    /// The stretch to the receiver; `upper_km` is the highest receiver possible.
    pub(super) last: Span<'a>,
    /// The only ray parameter there is, for a wave that runs along the bottom of
    /// the last stretch before it rises.
    pub(super) grazing_s: Option<f64>,
}

impl Span<'_> {
    /// Ray parameter of the ray that just reaches the lower end.
    pub(super) fn grazing_s(&self) -> f64 {
        horizontal_s(self.model, self.lower_km, Side::Above) * (1.0 - NUDGE)
    }
}

/// Where the last stretch begins: shell index and radius in km.
pub(super) type Foot = (usize, f64);

impl Route<'_> {
    /// Travel up to the last stretch and where that begins; `None` if no ray of
    /// this parameter takes the route, or a stretch of it has no length.
    pub(super) fn start(&self, ray_parameter: f64) -> Option<(Travel, Foot)> {
        let last = &self.last;
        let reached = last.model.shell_index(last.lower_km, Side::Above);
        let mut foot = (!last.turns).then_some((reached, last.lower_km));
        let mut travel = Travel::default();
        for span in &self.fixed {
            if span.upper_km <= span.lower_km {
                return None;
            }
            let (part, ending) = span
                .model
                .descend(ray_parameter, span.upper_km, span.lower_km);
            match (ending, span.turns) {
                (Ending::Turned(shell), true) => {
                    let bottom_km = span.model.shells()[shell].bottom_km;
                    foot = foot.or(Some((shell, bottom_km.max(span.lower_km))));
                }
                (Ending::Reached(_), false) => {}
                _ => return None,
            }
            travel += part;
        }
        foot.map(|foot| (travel, foot))
    }

    /// Travel to each of the rising receiver radii, [`Travel::NONE`] where the
    /// ray does not come by.
    pub(super) fn travel(&self, ray_parameter: f64, receivers_km: &[f64], out: &mut [Travel]) {
        let Some((fixed, foot)) = self.start(ray_parameter) else {
            out.fill(Travel::NONE);
            return;
        };
        self.last
            .model
            .ascend(ray_parameter, foot, receivers_km, out);
        for travel in out {
            *travel += fixed;
        }
    }

    /// Falling ray parameters between which travel is a smooth function of the
    /// ray parameter for every receiver.
    pub(super) fn critical_s(&self, receivers_km: &[f64]) -> Vec<f64> {
        let mut found = Vec::new();
        for span in self.fixed.iter().chain([&self.last]) {
            let ends = span_ends(span);
            if span.turns {
                found.extend(ends);
            } else {
                found.push(ends.fold(f64::INFINITY, f64::min));
            }
        }
        if self.last.turns {
            found.extend(receivers_km.iter().flat_map(|&radius_km| {
                [Side::Above, Side::Below]
                    .map(|side| horizontal_s(self.last.model, radius_km, side))
            }));
        }
        if !self.fixed.iter().any(|span| span.turns) {
            found.push(0.0);
        }
        found.sort_by(|a, b| b.total_cmp(a));
        found.dedup_by(|a, b| (*b - *a) <= 1e-9 * *b);
        found
    }
}

/// η at both sides of every shell border of a span, and at its ends.
fn span_ends<'a>(span: &Span<'a>) -> impl Iterator<Item = f64> + use<'a> {
    let (upper_km, lower_km) = (span.upper_km, span.lower_km);
    span.model
        .shells()
        .iter()
        .filter(move |shell| shell.bottom_km < upper_km && shell.top_km > lower_km)
        .flat_map(move |shell| {
            [
                shell.horizontal_s(shell.top_km.min(upper_km)),
                shell.horizontal_s(shell.bottom_km.max(lower_km)),
            ]
        })
}

fn horizontal_s(model: &RadialModel, radius_km: f64, side: Side) -> f64 {
    model.shells()[model.shell_index(radius_km, side)].horizontal_s(radius_km)
}
