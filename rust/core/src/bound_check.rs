//! A wider search of a few rays, to see what the bound of the others cost: [`BoundCheck`].

/// Outcome of second searches inside a wider bound; the rays stay as they are.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct BoundCheck {
    /// Rays searched again.
    pub checked: usize,
    /// Those found earlier by more than [`BoundCheck::COUNTS_S`].
    pub improved: usize,
    /// Largest gain (s).
    pub largest_gain_s: f64,
}

impl BoundCheck {
    /// Gains up to this (s) are left out of the count.
    pub const COUNTS_S: f64 = 1e-3;
    /// One ray in so many is searched again.
    pub const ONE_IN: u64 = 100;

    /// Whether the ray of a pair is searched again: about one per
    /// [`Self::ONE_IN`], scattered over the pairs.
    pub(crate) fn takes(pair: usize) -> bool {
        let scattered = (pair as u64).wrapping_mul(0x9E37_79B9_7F4A_7C15) >> 32;
        (scattered * Self::ONE_IN) >> 32 == 0
    }

    pub(crate) fn add(&mut self, gain_s: f64) {
        self.join(Self {
            checked: 1,
            improved: usize::from(gain_s > Self::COUNTS_S),
            largest_gain_s: gain_s,
        });
    }

    pub(crate) fn join(&mut self, other: Self) {
        self.checked += other.checked;
        self.improved += other.improved;
        self.largest_gain_s = self.largest_gain_s.max(other.largest_gain_s);
    }
}
