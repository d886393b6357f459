//! The words of a line that says how far long work has come.

use super::message::Line;

/// One line: what is done, how far it is, how fast it goes and how long it will still take.
pub fn words(line: &Line) -> String {
    // A hostile name must not move a terminal's cursor.
    let what: String = line.what.chars().filter(|c| !c.is_control()).take(60).collect();
    let rate = line.done as f64 / line.seconds.max(1e-9);
    let pace = if line.done == 0 { String::new() } else { format!(", {}", speed(rate)) };
    match line.total {
        None => format!("{what}: {} done{pace}", grouped(line.done)),
        Some(total) => {
            let left = total.saturating_sub(line.done) as f64 / rate;
            let left = if line.done == 0 || total <= line.done {
                String::new()
            } else {
                format!(", about {} left", duration(left))
            };
            format!("{what}: {} of {}{pace}{left}", grouped(line.done), grouped(total))
        }
    }
}

fn speed(rate: f64) -> String {
    if rate >= 1.0 {
        format!("{} a second", grouped(rate.round() as usize))
    } else if rate * 60.0 >= 1.0 {
        format!("{} a minute", (rate * 60.0).round())
    } else {
        format!("{} an hour", (rate * 3600.0).round())
    }
}

fn duration(seconds: f64) -> String {
    let seconds = seconds.ceil().min(1e9) as u64;
    match (seconds / 3600, seconds / 60 % 60, seconds % 60) {
        (0, 0, seconds) => format!("{seconds} s"),
        (0, minutes, seconds) => format!("{minutes} min {seconds} s"),
        (hours, minutes, _) => format!("{hours} h {minutes} min"),
    }
}

/// Digits in groups of three, apart by a narrow space that does not break.
fn grouped(count: usize) -> String {
    let digits = count.to_string();
    let mut out = String::new();
    for (place, digit) in digits.chars().enumerate() {
        if place > 0 && (digits.len() - place).is_multiple_of(3) && digits.len() > 4 {
            out.push('\u{202f}');
        }
        out.push(digit);
    }
    out
}

#[cfg(test)]
mod tests {
    use super::*;

    fn line(what: &str, done: usize, total: Option<usize>, seconds: f64) -> String {
        words(&Line { what: what.to_owned(), done, total, seconds })
    }

    #[test]
    fn the_line_says_how_far_how_fast_and_how_long() {
        assert_eq!(
            line("bootstrap", 500, Some(2000), 2.0),
            "bootstrap: 500 of 2000, 250 a second, about 6 s left"
        );
        assert_eq!(line("bootstrap", 0, Some(2000), 1.2), "bootstrap: 0 of 2000");
        assert_eq!(line("search", 12_000, None, 3.0), "search: 12\u{202f}000 done, 4000 a second");
        assert_eq!(
            line("fits", 2, Some(100), 200.0),
            "fits: 2 of 100, 36 an hour, about 2 h 43 min left"
        );
        assert_eq!(line("a\u{1b}[2Jb\n", 3, Some(3), 1.0), "a[2Jb: 3 of 3, 3 a second");
    }
}
