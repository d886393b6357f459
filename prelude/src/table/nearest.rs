//! Which known name a mistyped one was probably meant to be.

/// The known name with the fewest edits to the wanted one, if it is close enough to be a slip.
///
/// Close enough means: equal when case, spaces and punctuation are ignored, or no more than one
/// edit (insertion, deletion, substitution, swap of neighbours) for every three characters.
pub(crate) fn nearest<S: AsRef<str>>(
    wanted: &str,
    known: impl IntoIterator<Item = S>,
) -> Option<String> {
    // Names from hostile files may be of any length; nobody mistypes a name that long.
    const LONGEST: usize = 200;
    let plain_wanted = plain(wanted);
    if plain_wanted.len() > LONGEST {
        return None;
    }
    known
        .into_iter()
        .filter(|name| name.as_ref().len() <= 4 * LONGEST)
        .filter_map(|name| {
            let plain_name = plain(name.as_ref());
            let limit = plain_wanted.len().max(plain_name.len()).div_ceil(3);
            if plain_name.len().abs_diff(plain_wanted.len()) > limit {
                return None;
            }
            let edits = edits(&plain_wanted, &plain_name);
            (edits <= limit && edits < plain_wanted.len().max(1)).then_some((edits, name))
        })
        .min_by_key(|(edits, _)| *edits)
        .map(|(_, name)| name.as_ref().to_owned())
}

fn plain(name: &str) -> Vec<char> {
    name.chars().filter(|c| c.is_alphanumeric()).flat_map(char::to_lowercase).collect()
}

/// The number of edits between two names (optimal string alignment).
fn edits(a: &[char], b: &[char]) -> usize {
    let mut before = vec![0; b.len() + 1];
    let mut last: Vec<usize> = (0..=b.len()).collect();
    for (i, &from) in a.iter().enumerate() {
        let mut row = vec![i + 1; b.len() + 1];
        for (j, &to) in b.iter().enumerate() {
            row[j + 1] = (last[j] + usize::from(from != to)).min(last[j + 1] + 1).min(row[j] + 1);
            if i > 0 && j > 0 && from == b[j - 1] && a[i - 1] == to {
                row[j + 1] = row[j + 1].min(before[j - 1] + 1);
            }
        }
        before = std::mem::replace(&mut last, row);
    }
    last[b.len()]
}
