//! Colours and shapes of charts.
//!
//! A chart draws its own light card, because a client may show it as a picture, where neither
//! the page's colours nor its theme reach: on a dark page a light card stays readable, while dark
//! ink on a transparent ground would not. The eight group colours differ in lightness as well as
//! in hue, so that they stay apart in greyscale and in the three dichromacies, and every group
//! has a shape of its own as second cue.

/// The ground of the card.
pub(super) const CARD: &str = "#fcfbf8";
/// The card's edge.
pub(super) const CARD_EDGE: &str = "#d8d3c8";
/// Titles and labels.
pub(super) const INK: &str = "#22252b";
/// Axis text and notes.
pub(super) const INK_SOFT: &str = "#555a63";
/// Grid lines.
pub(super) const GRID: &str = "#e7e3da";
/// The lines through the origin.
pub(super) const ZERO: &str = "#b3ada0";
/// What is drawn but should recede.
pub(super) const FAINT: &str = "#8d8a84";

/// Group colours in the order of use.
///
/// Found by a search over CIELAB for the largest smallest distance under normal vision and the
/// three simulated dichromacies, with lightness between 22 and 64; the tests measure it.
pub(super) const GROUPS: [&str; 8] =
    ["#2d2582", "#b8983c", "#ca467a", "#065948", "#2495e0", "#ba6f55", "#944a97", "#3d450f"];

/// Units without a group.
pub(super) const NO_GROUP: &str = FAINT;

/// The shades of aggregated counts, from few to many; neutral, so that groups stand out on them.
pub(super) const COUNTS: [&str; 5] = ["#e6e2d9", "#d0cbc0", "#b5afa3", "#989287", "#7b756c"];
/// The segments of a divided strip and the ink on each; the last serves all that follow.
pub(super) const SEGMENTS: [(&str, &str); 4] =
    [("#2d2582", CARD), ("#463f9d", CARD), ("#97a9d4", INK), ("#c9d3e6", INK)];

/// Components that add up in one bar, first to fourth.
pub(super) const LAYERS: [&str; 4] = ["#2d2582", "#7d78bd", "#b3bfe0", "#d9d3c3"];

/// The full colours of what is positive and what is negative, for shades that grow from the card's
/// ground. They differ in lightness, and a sign or a stroke is always the second cue.
pub(super) const POSITIVE: &str = "#2d2582";
/// See [`POSITIVE`].
pub(super) const NEGATIVE: &str = "#b98a2b";

/// The shade of a value between −1 and 1, from the ground of the card to a full colour, and the
/// ink that can be read on it.
pub(super) fn shade(value: f64) -> (String, &'static str) {
    let full = if value < 0.0 { NEGATIVE } else { POSITIVE };
    let weight = value.abs().clamp(0.0, 1.0);
    let mixed = mix(CARD, full, weight);
    // At this luminance black and white ink have the same contrast, 4.58 (WCAG 2.2).
    let ink = if luminance(&mixed) > 0.179 { "#000000" } else { "#ffffff" };
    (mixed, ink)
}

/// The relative luminance of a colour (WCAG 2.2, after IEC 61966-2-1).
fn luminance(hex: &str) -> f64 {
    let linear = |at: usize| {
        let s = channel(hex, at) / 255.0;
        if s <= 0.04045 { s / 12.92 } else { ((s + 0.055) / 1.055).powf(2.4) }
    };
    0.2126 * linear(1) + 0.7152 * linear(3) + 0.0722 * linear(5)
}

fn channel(hex: &str, at: usize) -> f64 {
    let digits = hex.get(at..at + 2).and_then(|digits| u8::from_str_radix(digits, 16).ok());
    f64::from(digits.unwrap_or(0))
}

/// A colour between two, each channel in proportion.
fn mix(from: &str, to: &str, weight: f64) -> String {
    let mut out = String::from("#");
    for at in [1, 3, 5] {
        let (a, b) = (channel(from, at), channel(to, at));
        out.push_str(&format!("{:02x}", (a + (b - a) * weight).round() as u8));
    }
    out
}

/// The shape of a mark.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Shape {
    Disc,
    Square,
    Triangle,
    Diamond,
    Cross,
    Wedge,
    Hexagon,
    Star,
}

/// Shapes in the order of use.
pub(super) const SHAPES: [Shape; 8] = [
    Shape::Disc,
    Shape::Square,
    Shape::Triangle,
    Shape::Diamond,
    Shape::Cross,
    Shape::Wedge,
    Shape::Hexagon,
    Shape::Star,
];

/// How one group is drawn.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) struct Cue {
    pub color: &'static str,
    pub shape: Shape,
}

/// The cue of the group at a place; 64 groups pass before one repeats.
pub(super) fn cue(place: usize) -> Cue {
    let n = GROUPS.len();
    Cue { color: GROUPS[place % n], shape: SHAPES[(place + place / n) % SHAPES.len()] }
}

impl Shape {
    /// The outline as corners around the centre, for a mark of the area of a disc of radius 1;
    /// a disc has none.
    pub fn corners(self) -> &'static [(f64, f64)] {
        match self {
            Shape::Disc => &[],
            Shape::Square => &[(-0.89, -0.89), (0.89, -0.89), (0.89, 0.89), (-0.89, 0.89)],
            Shape::Triangle => &[(0.0, -1.45), (1.25, 0.75), (-1.25, 0.75)],
            Shape::Diamond => &[(0.0, -1.4), (1.15, 0.0), (0.0, 1.4), (-1.15, 0.0)],
            Shape::Cross => &[
                (-0.45, -1.3),
                (0.45, -1.3),
                (0.45, -0.45),
                (1.3, -0.45),
                (1.3, 0.45),
                (0.45, 0.45),
                (0.45, 1.3),
                (-0.45, 1.3),
                (-0.45, 0.45),
                (-1.3, 0.45),
                (-1.3, -0.45),
                (-0.45, -0.45),
            ],
            Shape::Wedge => &[(0.0, 1.45), (1.25, -0.75), (-1.25, -0.75)],
            Shape::Hexagon => {
                &[(1.15, 0.0), (0.57, 1.0), (-0.57, 1.0), (-1.15, 0.0), (-0.57, -1.0), (0.57, -1.0)]
            }
            Shape::Star => &[
                (0.0, -1.6),
                (0.42, -0.42),
                (1.6, 0.0),
                (0.42, 0.42),
                (0.0, 1.6),
                (-0.42, 0.42),
                (-1.6, 0.0),
                (-0.42, -0.42),
            ],
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    type Triple = [f64; 3];

    // Machado, Oliveira and Fernandes (2009), A physiologically-based model for simulation of
    // color vision deficiency, IEEE TVCG 15(6), the authors' tables for severity 1.0; they apply
    // to linear RGB.
    const PROTANOPIA: [Triple; 3] = [
        [0.152286, 1.052583, -0.204868],
        [0.114503, 0.786281, 0.099216],
        [-0.003882, -0.048116, 1.051998],
    ];
    const DEUTERANOPIA: [Triple; 3] = [
        [0.367322, 0.860646, -0.227968],
        [0.280085, 0.672501, 0.047413],
        [-0.011820, 0.042940, 0.968881],
    ];
    const TRITANOPIA: [Triple; 3] = [
        [1.255528, -0.076749, -0.178779],
        [-0.078411, 0.930809, 0.147602],
        [0.004733, 0.691367, 0.303900],
    ];
    const NORMAL: [Triple; 3] = [[1.0, 0.0, 0.0], [0.0, 1.0, 0.0], [0.0, 0.0, 1.0]];
    // IEC 61966-2-1 (sRGB), linear RGB to CIE XYZ, white point D65.
    const TO_XYZ: [Triple; 3] =
        [[0.4124, 0.3576, 0.1805], [0.2126, 0.7152, 0.0722], [0.0193, 0.1192, 0.9505]];

    fn times(matrix: &[Triple; 3], v: Triple) -> Triple {
        matrix.map(|row| row[0] * v[0] + row[1] * v[1] + row[2] * v[2])
    }

    fn linear(hex: &str) -> Triple {
        [1, 3, 5].map(|from| {
            let s = f64::from(u8::from_str_radix(&hex[from..from + 2], 16).unwrap()) / 255.0;
            if s <= 0.04045 { s / 12.92 } else { ((s + 0.055) / 1.055).powf(2.4) }
        })
    }

    // CIE 15:2004, CIELAB.
    fn lab(linear: Triple) -> Triple {
        let xyz = times(&TO_XYZ, linear.map(|v| v.clamp(0.0, 1.0)));
        let white = times(&TO_XYZ, [1.0; 3]);
        let f = |i: usize| {
            let t: f64 = xyz[i] / white[i];
            if t > 216.0 / 24389.0 { t.cbrt() } else { (24389.0 / 27.0 * t + 16.0) / 116.0 }
        };
        [116.0 * f(1) - 16.0, 500.0 * (f(0) - f(1)), 200.0 * (f(1) - f(2))]
    }

    fn distance(a: Triple, b: Triple) -> f64 {
        a.iter().zip(b).map(|(a, b)| (a - b).powi(2)).sum::<f64>().sqrt()
    }

    fn smallest_distance(colors: &[&str], sight: &[Triple; 3]) -> f64 {
        let seen: Vec<Triple> = colors.iter().map(|c| lab(times(sight, linear(c)))).collect();
        let mut least = f64::INFINITY;
        for (i, a) in seen.iter().enumerate() {
            for b in &seen[..i] {
                least = least.min(distance(*a, *b));
            }
        }
        least
    }

    // WCAG 2.2, contrast ratio.
    fn contrast(a: &str, b: &str) -> f64 {
        let luminance = |hex| times(&TO_XYZ, linear(hex))[1];
        let (a, b) = (luminance(a), luminance(b));
        (a.max(b) + 0.05) / (a.min(b) + 0.05)
    }

    #[test]
    fn groups_stay_apart_in_every_sight() {
        // A just noticeable difference in CIELAB is about 2.3 (Mahy, Van Eycken and Oosterlinck,
        // 1994; from memory); small marks need several times that.
        for (name, sight, least) in [
            ("normal", &NORMAL, 28.0),
            ("protanopia", &PROTANOPIA, 18.0),
            ("deuteranopia", &DEUTERANOPIA, 18.0),
            ("tritanopia", &TRITANOPIA, 18.0),
        ] {
            let found = smallest_distance(&GROUPS, sight);
            assert!(found >= least, "{name}: {found:.1}");
        }
    }

    #[test]
    fn the_measure_finds_confusable_colours() {
        // Red and green of equal lightness are the classical confusion; the check must see it.
        assert!(smallest_distance(&["#c05030", "#7a7a00"], &DEUTERANOPIA) < 18.0);
        assert!(smallest_distance(&["#c05030", "#7a7a00"], &NORMAL) > 28.0);
    }

    #[test]
    fn groups_differ_in_greyscale() {
        let mut lightness: Vec<f64> = GROUPS.iter().map(|color| lab(linear(color))[0]).collect();
        lightness.sort_by(f64::total_cmp);
        for pair in lightness.windows(2) {
            assert!(pair[1] - pair[0] >= 4.0, "{lightness:?}");
        }
    }

    #[test]
    fn text_and_marks_stand_out_from_the_card() {
        assert!(contrast(INK, CARD) >= 7.0);
        assert!(contrast(INK_SOFT, CARD) >= 4.5);
        for color in GROUPS {
            assert!(contrast(color, CARD) >= 2.5, "{color}: {:.2}", contrast(color, CARD));
        }
        for (ground, ink) in SEGMENTS {
            assert!(contrast(ground, ink) >= 4.5, "{ink} on {ground}");
        }
        // Checked against the definition: black on white is 21 to 1.
        assert!((contrast("#000000", "#ffffff") - 21.0).abs() < 1e-9);
    }

    #[test]
    fn numbers_can_be_read_on_every_shade() {
        for step in -100..=100 {
            let value = f64::from(step) / 100.0;
            let (ground, ink) = shade(value);
            assert!(contrast(&ground, ink) >= 4.5, "{value}: {ink} on {ground}");
        }
    }

    #[test]
    fn shades_of_opposite_sign_differ_in_every_sight() {
        for sight in [&NORMAL, &PROTANOPIA, &DEUTERANOPIA, &TRITANOPIA] {
            let colors = [shade(0.8).0, shade(-0.8).0, shade(0.0).0];
            assert!(smallest_distance(&colors.each_ref().map(String::as_str), sight) > 30.0);
        }
    }

    #[test]
    fn layers_that_touch_differ_in_every_sight() {
        for sight in [&NORMAL, &PROTANOPIA, &DEUTERANOPIA, &TRITANOPIA] {
            for pair in LAYERS.windows(2) {
                let found = smallest_distance(pair, sight);
                assert!(found > 15.0, "{pair:?}: {found:.1}");
            }
        }
    }

    #[test]
    fn shades_of_counts_darken_steadily() {
        let lightness: Vec<f64> = COUNTS.iter().map(|color| lab(linear(color))[0]).collect();
        assert!(lightness.windows(2).all(|pair| pair[0] - pair[1] > 8.0), "{lightness:?}");
    }

    #[test]
    fn sixty_four_groups_have_a_cue_of_their_own() {
        for a in 0..64 {
            for b in 0..a {
                assert_ne!(cue(a), cue(b), "groups {a} and {b}");
            }
        }
    }
}
