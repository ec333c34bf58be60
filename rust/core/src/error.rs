//! The one error type of the crate: [`CoreError`].

use thiserror::Error;

/// Everything that can go wrong in the core.
///
/// The fields say what was wrong, what was expected and what was met, so that
/// a caller can build a message without parsing text.
#[derive(Debug, Clone, PartialEq, Eq, Error)]
pub enum CoreError {
    /// An argument is not what it should be.
    #[error("{what}: expected {expected}, got {got}")]
    Invalid {
        /// The argument or quantity concerned.
        what: String,
        /// What it should have been.
        expected: String,
        /// What it was.
        got: String,
    },
    /// The caller asked for the work to stop.
    #[error("interrupted")]
    Interrupted,
}

impl CoreError {
    /// Shorthand for [`CoreError::Invalid`].
    pub fn invalid(
        what: impl Into<String>,
        expected: impl Into<String>,
        got: impl Into<String>,
    ) -> Self {
        Self::Invalid {
            what: what.into(),
            expected: expected.into(),
            got: got.into(),
        }
    }
}

/// Result of a core call.
pub type Result<T> = std::result::Result<T, CoreError>;
