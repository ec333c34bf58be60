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
    /// Sea level.
    Surface,
    /// The source.
    Source,
    /// The receiver.
    Receiver,
    /// The boundary between mantle and core.
    CoreTop,
    /// The boundary between fluid and solid core.
    InnerCoreTop,
    /// The Earth's centre.
    Centre,
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
    /// Another name in use.
    pub alias: Option<&'static str>,
    /// The legs.
    pub legs: &'static [Leg],
    /// Whether it grazes the bottom of its last leg and runs along it there.
    pub diffracts: bool,
}

impl Leg {
    const fn down(wave: Wave, upper: Anchor, lower: Anchor) -> Self {
        Self {
            wave,
            upper,
            lower,
            turns: false,
            rises: false,
        }
    }

    const fn up(wave: Wave, lower: Anchor, upper: Anchor) -> Self {
        Self {
            rises: true,
            ..Self::down(wave, upper, lower)
        }
    }

    const fn turning(self) -> Self {
        Self {
            turns: true,
            ..self
        }
    }
}

impl Phase {
    const fn new(name: &'static str, legs: &'static [Leg]) -> Self {
        Self {
            name,
            alias: None,
            legs,
            diffracts: false,
        }
    }

    /// The wave type as which the phase reaches the receiver.
    ///
    /// # Panics
    /// If the phase has no leg.
    #[must_use]
    pub fn arriving_wave(&self) -> Wave {
        self.legs[self.legs.len() - 1].wave
    }

    /// The phase of a name or an alias.
    #[must_use]
    pub fn named(name: &str) -> Option<&'static Self> {
        PHASES
            .iter()
            .find(|phase| phase.name == name || phase.alias == Some(name))
    }

    /// Whether the phase goes down from the source and turns in the mantle,
    /// touching no boundary on its way.
    #[must_use]
    pub fn is_direct(&self) -> bool {
        self.legs.len() == 2 && self.legs[0].turns
    }
}

use Anchor::{Centre, CoreTop, InnerCoreTop, Receiver, Source, Surface};
use Wave::{P, S};

/// Down to the core and up again.
const TO_THE_CORE_P: &[Leg] = &[Leg::down(P, Source, CoreTop), Leg::up(P, CoreTop, Receiver)];

/// Every phase known here.
pub const PHASES: [Phase; 9] = [
    Phase::new(
        "P",
        &[
            Leg::down(P, Source, CoreTop).turning(),
            Leg::up(P, CoreTop, Receiver).turning(),
        ],
    ),
    Phase {
        diffracts: true,
        ..Phase::new("Pdiff", TO_THE_CORE_P)
    },
    Phase::new("PcP", TO_THE_CORE_P),
    Phase {
        alias: Some("PKIKP"),
        ..Phase::new(
            "PKPdf",
            &[
                Leg::down(P, Source, CoreTop),
                Leg::down(P, CoreTop, InnerCoreTop),
                Leg::down(P, InnerCoreTop, Centre).turning(),
                Leg::up(P, Centre, InnerCoreTop).turning(),
                Leg::up(P, InnerCoreTop, CoreTop),
                Leg::up(P, CoreTop, Receiver),
            ],
        )
    },
    Phase::new(
        "pP",
        &[
            Leg::up(P, Source, Surface),
            Leg::down(P, Surface, CoreTop).turning(),
            Leg::up(P, CoreTop, Receiver).turning(),
        ],
    ),
    Phase::new(
        "sP",
        &[
            Leg::up(S, Source, Surface),
            Leg::down(P, Surface, CoreTop).turning(),
            Leg::up(P, CoreTop, Receiver).turning(),
        ],
    ),
    Phase::new(
        "S",
        &[
            Leg::down(S, Source, CoreTop).turning(),
            Leg::up(S, CoreTop, Receiver).turning(),
        ],
    ),
    Phase::new(
        "ScS",
        &[Leg::down(S, Source, CoreTop), Leg::up(S, CoreTop, Receiver)],
    ),
    Phase::new(
        "SKS",
        &[
            Leg::down(S, Source, CoreTop),
            Leg::down(P, CoreTop, InnerCoreTop).turning(),
            Leg::up(P, InnerCoreTop, CoreTop).turning(),
            Leg::up(S, CoreTop, Receiver),
        ],
    ),
];
