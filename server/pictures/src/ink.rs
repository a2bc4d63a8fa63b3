//! The colours, each with its counterpart for dark surroundings.
//!
//! The five that carry data differ in lightness as well as in hue, so that they stay apart for readers
//! who do not tell red from green, and in print. Nothing is said by colour alone: limits are dashed,
//! and curves carry their name.

use plotters::style::RGBColor;

/// What a stroke or a fill stands for.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Ink {
    /// The ground of the picture.
    Paper,
    /// Words and axes.
    Text,
    /// Words of less weight.
    Quiet,
    /// Lines of the grid.
    Grid,
    /// First curve: what is the case.
    Slate,
    /// Second curve: what is believed, or compared with.
    Amber,
    /// Third curve.
    Plum,
    /// Fourth curve.
    Moss,
    /// Limits and breaches of them.
    Brick,
}

impl Ink {
    /// Every ink.
    pub const ALL: [Self; 9] = [
        Self::Paper,
        Self::Text,
        Self::Quiet,
        Self::Grid,
        Self::Slate,
        Self::Amber,
        Self::Plum,
        Self::Moss,
        Self::Brick,
    ];

    /// The colour on light ground, as 0xRRGGBB.
    pub const fn light(self) -> u32 {
        match self {
            Self::Paper => 0xFB_FA_F6,
            Self::Text => 0x23_27_2B,
            Self::Quiet => 0x60_66_6D,
            Self::Grid => 0xDD_DA_D1,
            Self::Slate => 0x1F_4E_79,
            Self::Amber => 0xC9_76_00,
            Self::Plum => 0x8E_3F_7C,
            Self::Moss => 0x4F_7A_34,
            Self::Brick => 0xA8_32_22,
        }
    }

    /// The colour on dark ground, as 0xRRGGBB.
    pub const fn dark(self) -> u32 {
        match self {
            Self::Paper => 0x17_1A_1D,
            Self::Text => 0xE7_E4_DC,
            Self::Quiet => 0xA3_A8_AE,
            Self::Grid => 0x37_3C_41,
            Self::Slate => 0x86_B9_EA,
            Self::Amber => 0xF0_AE_45,
            Self::Plum => 0xD9_97_CB,
            Self::Moss => 0xA3_CB_84,
            Self::Brick => 0xF0_83_72,
        }
    }

    pub(crate) fn color(self) -> RGBColor {
        let [_, r, g, b] = self.light().to_be_bytes();
        RGBColor(r, g, b)
    }
}

/// The style sheet that gives pictures their dark colours where dark is preferred. A picture in a file
/// carries it; a page that shows pictures inline takes it into its own style sheet, once.
pub const STYLE: &str = include_str!("dark.css");

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_style_sheet_maps_every_ink() {
        let rules: String = Ink::ALL
            .iter()
            .map(|ink| {
                let (light, dark) = (ink.light(), ink.dark());
                format!(
                    "  .picture [fill=\"#{light:06X}\"] {{ fill: #{dark:06X} }}\n  \
                     .picture [stroke=\"#{light:06X}\"] {{ stroke: #{dark:06X} }}\n"
                )
            })
            .collect();
        assert_eq!(
            STYLE,
            format!("@media (prefers-color-scheme: dark) {{\n{rules}}}\n")
        );
    }

    /// Relative luminance and contrast as WCAG 2.2 defines them: 4.5 for words, 3 for curves.
    #[test]
    fn everything_is_legible_on_its_ground() {
        let linear = |byte: u8| {
            let c = f64::from(byte) / 255.0;
            if c <= 0.04045 {
                c / 12.92
            } else {
                ((c + 0.055) / 1.055).powf(2.4)
            }
        };
        let luminance = |rgb: u32| {
            let [_, r, g, b] = rgb.to_be_bytes().map(linear);
            0.2126 * r + 0.7152 * g + 0.0722 * b
        };
        let contrast = |a: f64, b: f64| (a.max(b) + 0.05) / (a.min(b) + 0.05);
        let on = |colour: fn(Ink) -> u32| {
            move |ink| contrast(luminance(colour(ink)), luminance(colour(Ink::Paper)))
        };
        for contrast in [on(Ink::light), on(Ink::dark)] {
            for ink in [Ink::Text, Ink::Quiet, Ink::Brick] {
                assert!(contrast(ink) >= 4.5, "{ink:?}: {}", contrast(ink));
            }
            for ink in [Ink::Slate, Ink::Amber, Ink::Plum, Ink::Moss] {
                assert!(contrast(ink) >= 3.0, "{ink:?}: {}", contrast(ink));
            }
        }
    }
}
