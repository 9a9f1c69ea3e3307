//! Why there is no answer, and how a run is watched.

/// A point of a surface at which something is wrong.
#[derive(Clone, PartialEq, Debug)]
pub struct Place {
    /// The patch.
    pub patch: String,
    /// Its variables and their values.
    pub variables: [(String, f64); 2],
    /// The position there; components may be undefined.
    pub position: [f64; 3],
    /// The innermost sub-expression that is undefined.
    pub expression: String,
    /// Its value: NaN or an infinity.
    pub value: f64,
}

/// Why there is no answer.
#[derive(Clone, PartialEq, Debug, thiserror::Error)]
#[error("{message}")]
pub struct IntegralError {
    /// A stable short name for programs, such as `undefined` or `divergent`.
    pub code: &'static str,
    /// What was found and where.
    pub message: String,
    /// The point of the surface, where there is one.
    pub place: Option<Box<Place>>,
    /// What to change.
    pub hint: Option<String>,
}

impl IntegralError {
    pub(crate) fn new(code: &'static str, message: impl Into<String>) -> Self {
        Self { code, message: message.into(), place: None, hint: None }
    }

    pub(crate) fn with_hint(mut self, hint: impl Into<String>) -> Self {
        self.hint = Some(hint.into());
        self
    }
}

/// Watches a run. Called between rounds of work, from the thread that asked.
pub trait Progress: Sync {
    /// `so_far` evaluations of integrands are done.
    fn evaluations(&self, so_far: u64) {
        let _ = so_far;
    }

    /// Whether to stop and return what there is.
    fn cancelled(&self) -> bool {
        false
    }
}

/// A run that nobody watches.
#[derive(Clone, Copy, Debug, Default)]
pub struct NoProgress;

impl Progress for NoProgress {}
