//! Colours, by what they stand for.
//!
//! Three hues carry meaning in every figure: what the evaluations say, what the proposal or a fit says, and what one
//! compares with. They differ in lightness as well as in hue, so that they stay apart in grey print and for readers
//! who see few hues; lines differ in dash, markers in filling too.

/// A colour of the sRGB space, eight bits a channel.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Colour {
    /// Red, green and blue.
    pub channels: [u8; 3],
}

/// The paper.
pub const PAPER: Colour = Colour { channels: [255, 255, 255] };
/// Text and axes.
pub const INK: Colour = Colour { channels: [33, 37, 43] };
/// What the evaluations say: fresh scores, weighted points, observed weights.
pub const MEASURED: Colour = Colour { channels: [19, 52, 104] };
/// What the proposal or a fit says: predictions, densities, components, the fitted tail.
pub const MODELLED: Colour = Colour { channels: [186, 68, 8] };
/// What one compares with: the diagonal of even weights, limits, thresholds.
pub const REFERENCE: Colour = Colour { channels: [96, 102, 111] };
/// A light tone of [`MEASURED`], for areas.
pub const MEASURED_TINT: Colour = Colour { channels: [203, 216, 236] };
/// A middle tone of [`MEASURED`], for areas within those.
pub const MEASURED_SHADE: Colour = Colour { channels: [142, 168, 212] };
/// Ground of a span of the horizontal axis or of a strip.
pub const GROUND: Colour = Colour { channels: [240, 241, 243] };

impl Colour {
    /// Relative luminance between 0 (black) and 1 (white).
    ///
    /// Source: IEC 61966-2-1 (sRGB), as used by the Web Content Accessibility Guidelines 2.1, "relative luminance".
    #[must_use]
    pub fn luminance(self) -> f64 {
        let linear = self.channels.map(|channel| {
            let level = f64::from(channel) / 255.0;
            if level <= 0.040_45 { level / 12.92 } else { libm::pow((level + 0.055) / 1.055, 2.4) }
        });
        0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]
    }

    /// Contrast ratio of two colours, between 1 (alike) and 21 (black on white).
    ///
    /// Source: Web Content Accessibility Guidelines 2.1, "contrast ratio".
    ///
    /// ```
    /// use evenpoise::figures::colour::{Colour, PAPER};
    /// let black = Colour { channels: [0, 0, 0] };
    /// assert!((black.contrast(PAPER) - 21.0).abs() < 1e-12);
    /// ```
    #[must_use]
    pub fn contrast(self, other: Self) -> f64 {
        let (a, b) = (self.luminance() + 0.05, other.luminance() + 0.05);
        if a > b { a / b } else { b / a }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// WCAG 2.1 asks 4.5 for text; every colour that writes text keeps to it, on paper and on the shaded ground.
    #[test]
    fn text_colours_are_readable() {
        for colour in [INK, MEASURED, MODELLED, REFERENCE] {
            for ground in [PAPER, GROUND] {
                assert!(colour.contrast(ground) >= 4.5, "{colour:?} on {ground:?}: {}", colour.contrast(ground));
            }
        }
    }

    /// In grey print only lightness is left.
    #[test]
    fn meanings_differ_in_lightness() {
        assert!(MEASURED.contrast(MODELLED) >= 2.2);
        assert!(MEASURED.contrast(REFERENCE) >= 2.0);
        assert!(MEASURED_TINT.contrast(MODELLED) >= 2.2);
        assert!(MEASURED_TINT.contrast(MEASURED_SHADE) >= 1.5 && MEASURED_SHADE.contrast(MEASURED) >= 3.0);
    }

    /// Source: the example of WCAG technique G18: #777777 on white is 4.48.
    #[test]
    fn contrast_of_a_known_pair() {
        let grey = Colour { channels: [0x77; 3] };
        assert!((grey.contrast(PAPER) - 4.478).abs() < 5e-4, "{}", grey.contrast(PAPER));
    }
}
