//! What a tuning looks for beyond a density, and the words of it in figures.

/// An event whose probability is wanted, or an integrand whose mean is.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Sought {
    /// An event, and the margin that is zero at its limit.
    Event,
    /// An integrand.
    Integrand,
}

impl Sought {
    /// What a draw is that counts.
    pub(super) fn inside(self) -> &'static str {
        match self {
            Self::Event => "in the event",
            Self::Integrand => "integrand not zero",
        }
    }

    /// What a draw is that does not count.
    pub(super) fn outside(self) -> &'static str {
        match self {
            Self::Event => "outside",
            Self::Integrand => "integrand zero",
        }
    }

    /// How many of the draws count: the end of a sentence that begins with their number.
    pub(super) fn of_them(self) -> &'static str {
        match self {
            Self::Event => "of them lie in the event",
            Self::Integrand => "of them have an integrand that is not zero",
        }
    }

    /// What the search found, one of it.
    pub(super) fn point(self) -> &'static str {
        match self {
            Self::Event => "design point",
            Self::Integrand => "mode",
        }
    }

    /// What the points of the search are, all of them.
    pub(super) fn points(self) -> &'static str {
        match self {
            Self::Event => {
                "the design points (the points of the event nearest to the origin of the scores) that the search found"
            }
            Self::Integrand => "the modes of the integrand times the nominal density that the search found",
        }
    }
}
