//! How much room words take, and where labels stand so that none covers another. Nothing here knows the reader's type,
//! so widths are those of the common sans-serifs, rounded up.

/// About how wide words are in type of `size`.
pub(super) fn width(words: &str, size: f64) -> f64 {
    words.chars().map(|letter| letter_width(letter) * size).sum()
}

/// The width of one letter in parts of the type size.
fn letter_width(letter: char) -> f64 {
    match letter {
        'i' | 'j' | 'l' | '.' | ',' | ':' | ';' | '|' | '\'' | '!' | '\u{202f}' => 0.3,
        ' ' | 'f' | 't' | 'r' | 'I' | '(' | ')' | '[' | ']' | '/' | '-' => 0.36,
        '⁰'..='⁾' | '¹' | '²' | '³' => 0.4,
        'm' | 'w' | 'M' | 'W' | '@' | '%' | '—' | '…' => 0.95,
        'A'..='Z' => 0.74,
        '0'..='9' | 'a'..='z' => 0.58,
        letter if letter < '\u{1100}' => 0.66,
        _ => 1.1,
    }
}

/// As many of the words as there is room for, with an ellipsis where some are missing.
pub(super) fn cut(words: &str, size: f64, room: f64) -> String {
    if width(words, size) <= room {
        return words.to_owned();
    }
    let mut left = room - letter_width('…') * size;
    let kept: String = words
        .chars()
        .take_while(|letter| {
            left -= letter_width(*letter) * size;
            left >= 0.0
        })
        .collect();
    format!("{}…", kept.trim_end())
}

/// Words broken into at most `most` lines, at spaces where there are any; the last line is cut.
pub(super) fn lines(words: &str, size: f64, room: f64, most: usize) -> Vec<String> {
    let mut lines: Vec<String> = vec![String::new()];
    for word in words.split_whitespace() {
        let full = lines.len() >= most;
        let Some(line) = lines.last_mut() else { break };
        if line.is_empty() {
            word.clone_into(line);
        } else if full || width(line, size) + width(" ", size) + width(word, size) <= room {
            line.push(' ');
            line.push_str(word);
        } else {
            lines.push(word.to_owned());
        }
    }
    lines.iter().map(|line| cut(line, size, room)).collect()
}

/// Places at least `spacing` apart between `low` and `high`, together as near as can be (in least squares) to those
/// that were desired, and in their order. There must be room for all of them.
///
/// Distances are taken out first, which leaves places that must only ascend; neighbours that do not are pooled at their
/// mean (isotonic regression by pooling adjacent violators, Ayer and others 1955).
pub(super) fn spread(desired: &[f64], spacing: f64, low: f64, high: f64) -> Vec<f64> {
    let mut order: Vec<usize> = (0..desired.len()).collect();
    let at = |index: usize| desired.get(index).copied().unwrap_or(low);
    order.sort_by(|left, right| at(*left).total_cmp(&at(*right)));
    let mut pools: Vec<(f64, usize)> = Vec::new();
    for (rank, index) in order.iter().enumerate() {
        let mut pool = (at(*index) - rank as f64 * spacing, 1);
        while let Some((mean, count)) = pools.pop_if(|(mean, _)| *mean >= pool.0) {
            let total = mean * count as f64 + pool.0 * pool.1 as f64;
            pool = (total / (count + pool.1) as f64, count + pool.1);
        }
        pools.push(pool);
    }
    let last = (high - desired.len().saturating_sub(1) as f64 * spacing).max(low);
    let means = pools.into_iter().flat_map(|(mean, count)| std::iter::repeat_n(mean.clamp(low, last), count));
    let mut placed = vec![low; desired.len()];
    for (rank, (index, mean)) in order.iter().zip(means).enumerate() {
        if let Some(place) = placed.get_mut(*index) {
            *place = mean + rank as f64 * spacing;
        }
    }
    placed
}

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use super::*;

    #[test]
    fn labels_that_meet_move_apart_evenly_and_others_stay() {
        assert_eq!(spread(&[50.0, 50.0, 200.0], 10.0, 0.0, 300.0), [45.0, 55.0, 200.0]);
        assert_eq!(spread(&[300.0, 299.0], 10.0, 0.0, 300.0), [300.0, 290.0]);
    }

    #[test]
    fn long_words_are_broken_and_then_cut() {
        assert_eq!(lines("one two three", 10.0, 45.0, 2), ["one two", "three"]);
        let cut = lines("respond(human |> without([haze]), model) |> since_1870()", 10.0, 120.0, 2);
        assert_eq!(cut.len(), 2);
        assert!(cut[1].ends_with('…') && cut.iter().all(|line| width(line, 10.0) <= 120.0), "{cut:?}");
        assert_eq!(lines("", 10.0, 45.0, 2), [""]);
    }

    proptest! {
        #[test]
        fn no_two_labels_overlap_and_all_are_inside(desired in proptest::collection::vec(-50.0..400.0f64, 0..20)) {
            let placed = spread(&desired, 15.0, 0.0, 300.0);
            let mut sorted = placed.clone();
            sorted.sort_by(f64::total_cmp);
            prop_assert!(sorted.iter().zip(sorted.iter().skip(1)).all(|(one, next)| next - one > 15.0 - 1e-9));
            prop_assert!(placed.iter().all(|place| (-1e-9..=300.0 + 1e-9).contains(place)));
            for (index, one) in desired.iter().enumerate() {
                for (other, two) in desired.iter().enumerate() {
                    prop_assert!(one >= two || placed[index] < placed[other], "in their order");
                }
            }
        }
    }
}
