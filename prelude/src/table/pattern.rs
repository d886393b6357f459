//! Patterns for names of columns.

/// Whether a name fits a pattern: `*` stands for any run of characters, also none, and `?` for one
/// character; every other character stands for itself, capitals included.
pub(crate) fn fits(pattern: &str, name: &str) -> bool {
    let pattern: Vec<char> = pattern.chars().collect();
    let name: Vec<char> = name.chars().collect();
    let (mut p, mut n) = (0, 0);
    // After the last star: where the pattern goes on, and up to where the star has reached. A
    // mismatch lets that star take one character more; earlier stars need no second thought.
    let mut retry: Option<(usize, usize)> = None;
    while n < name.len() {
        match pattern.get(p) {
            Some('*') => {
                p += 1;
                retry = Some((p, n));
            }
            Some(wanted) if *wanted == '?' || *wanted == name[n] => {
                p += 1;
                n += 1;
            }
            _ => {
                let Some((after_star, reached)) = retry else { return false };
                (p, n) = (after_star, reached + 1);
                retry = Some((p, n));
            }
        }
    }
    pattern[p..].iter().all(|rest| *rest == '*')
}

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use super::fits;

    #[test]
    fn stars_and_question_marks_stand_for_characters() {
        for (pattern, name, expected) in [
            ("colour_*", "colour_L", true),
            ("colour_*", "colour_", true),
            ("colour_*", "the colour_L", false),
            ("*_mm", "width_mm", true),
            ("*_mm", "width_mm2", false),
            ("?_mm", "é_mm", true),
            ("?_mm", "_mm", false),
            ("a*b*c", "a_b_b_c", true),
            ("a*b*c", "a_c_b", false),
            ("*", "", true),
            ("", "", true),
            ("", "a", false),
            ("width", "Width", false),
            ("**a", "ba", true),
        ] {
            assert_eq!(fits(pattern, name), expected, "{pattern} {name}");
        }
    }

    #[test]
    fn a_long_hostile_pattern_takes_no_time() {
        assert!(!fits(&"a*".repeat(2000), &"a".repeat(1999)));
        assert!(!fits(&format!("{}b", "*a".repeat(1000)), &"a".repeat(5000)));
    }

    /// The definition, coded naively.
    fn naive(pattern: &[char], name: &[char]) -> bool {
        match pattern.split_first() {
            None => name.is_empty(),
            Some(('*', rest)) => (0..=name.len()).any(|taken| naive(rest, &name[taken..])),
            Some((first, rest)) => {
                !name.is_empty() && (*first == '?' || *first == name[0]) && naive(rest, &name[1..])
            }
        }
    }

    proptest! {
        #[test]
        fn patterns_mean_what_the_definition_says(pattern in "[ab*?]{0,7}", name in "[ab]{0,9}") {
            let chars = |text: &str| text.chars().collect::<Vec<char>>();
            prop_assert_eq!(fits(&pattern, &name), naive(&chars(&pattern), &chars(&name)));
        }
    }
}
