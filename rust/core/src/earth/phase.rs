//! Seismic phases as lists of legs: [`Phase`].

/// Compressional or shear wave.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Wave {
    /// Compressional.
    P,
    /// Shear.
    S,
}

/// A radius between which legs run.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Anchor {
    /// The source.
    Source,
    /// The receiver.
    Receiver,
    /// The boundary between mantle and core.
    CoreTop,
}

/// A part of a phase between two anchors that it travels as one wave, down or up.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Leg {
    /// The wave type.
    pub wave: Wave,
    /// The upper end.
    pub upper: Anchor,
    /// What it reaches at its lower end; if it turns, what it must stay above.
    pub lower: Anchor,
    /// Whether the leg ends (downward) or begins (upward) at a turning point.
    pub turns: bool,
    /// Whether it is travelled upward.
    pub rises: bool,
}

/// A phase: its legs in the order of travel. The last rises to the receiver.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Phase {
    /// The usual name.
    pub name: &'static str,
    /// The legs.
    pub legs: &'static [Leg],
}

const fn turning(wave: Wave, upper: Anchor, rises: bool) -> Leg {
    Leg {
        wave,
        upper,
        lower: Anchor::CoreTop,
        turns: true,
        rises,
    }
}

/// Every phase known here.
pub const PHASES: [Phase; 2] = [
    Phase {
        name: "P",
        legs: &[
            turning(Wave::P, Anchor::Source, false),
            turning(Wave::P, Anchor::Receiver, true),
        ],
    },
    Phase {
        name: "S",
        legs: &[
            turning(Wave::S, Anchor::Source, false),
            turning(Wave::S, Anchor::Receiver, true),
        ],
    },
];

impl Phase {
    /// The wave type as which the phase reaches the receiver.
    ///
    /// # Panics
    /// If the phase has no leg.
    #[must_use]
    pub fn arriving_wave(&self) -> Wave {
        self.legs[self.legs.len() - 1].wave
    }

    /// The phase of a name.
    #[must_use]
    pub fn named(name: &str) -> Option<&'static Self> {
        PHASES.iter().find(|phase| phase.name == name)
    }
}
