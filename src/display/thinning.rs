//! Long lines with fewer points and without visible change: of each column of the drawing the first, the lowest, the
//! highest and the last point are kept.

/// Lines of more points than this in all are thinned, to about as many.
pub(super) const MOST: usize = 2000;

/// The points kept of one column.
const KEPT: f64 = 4.0;

/// The runs of a line in units of the drawing, `plot_width` of them across. Runs nearer to each other than a column are
/// one.
pub(super) fn thinned(runs: Vec<Vec<[f64; 2]>>, plot_width: f64) -> Vec<Vec<[f64; 2]>> {
    if is_short(&runs) {
        return runs;
    }
    let column_width = plot_width * KEPT / MOST as f64;
    joined(runs, column_width, |[x, _]| *x)
        .into_iter()
        .map(|run| {
            let mut kept = Vec::new();
            for column in
                run.chunk_by(|one, next| column_of(one[0], column_width) == column_of(next[0], column_width))
            {
                let extreme = |order: fn(&[f64; 2], &[f64; 2]) -> bool| {
                    let mut best = 0;
                    for (index, point) in column.iter().enumerate() {
                        if column.get(best).is_some_and(|before| order(point, before)) {
                            best = index;
                        }
                    }
                    best
                };
                let mut wanted = [
                    0,
                    extreme(|one, other| one[1] < other[1]),
                    extreme(|one, other| one[1] > other[1]),
                    column.len() - 1,
                ];
                wanted.sort_unstable();
                for (rank, index) in wanted.iter().enumerate() {
                    if rank == 0 || wanted.get(rank - 1) != Some(index) {
                        kept.extend(column.get(*index).copied());
                    }
                }
            }
            kept
        })
        .collect()
}

/// The runs of a band likewise: of each column the outermost of both edges.
pub(super) fn thinned_band(runs: Vec<Vec<[f64; 3]>>, plot_width: f64) -> Vec<Vec<[f64; 3]>> {
    if is_short(&runs) {
        return runs;
    }
    let column_width = plot_width * 2.0 / MOST as f64;
    joined(runs, column_width, |[x, _, _]| *x)
        .into_iter()
        .map(|run| {
            run.chunk_by(|one, next| column_of(one[0], column_width) == column_of(next[0], column_width))
                .flat_map(|column| {
                    // Down is up in a drawing: the lower edge has the larger numbers.
                    let low = column.iter().map(|[_, low, _]| *low).fold(f64::MIN, f64::max);
                    let high = column.iter().map(|[_, _, high]| *high).fold(f64::MAX, f64::min);
                    let first = column.first().map(|[x, _, _]| [*x, low, high]);
                    let last = column.last().map(|[x, _, _]| [*x, low, high]);
                    first.into_iter().chain(last.filter(|_| column.len() > 1))
                })
                .collect()
        })
        .collect()
}

fn is_short<Point>(runs: &[Vec<Point>]) -> bool {
    runs.iter().map(Vec::len).sum::<usize>() <= MOST
}

fn column_of(x: f64, column_width: f64) -> i64 {
    (x / column_width).floor() as i64
}

fn joined<Point: Copy>(runs: Vec<Vec<Point>>, column_width: f64, x: fn(&Point) -> f64) -> Vec<Vec<Point>> {
    let mut joined: Vec<Vec<Point>> = Vec::new();
    for run in runs {
        match (joined.last_mut(), run.first()) {
            (Some(before), Some(first))
                if before.last().is_some_and(|last| (x(first) - x(last)).abs() < column_width) =>
            {
                before.extend(run);
            }
            _ => joined.push(run),
        }
    }
    joined
}

#[cfg(test)]
mod tests {
    use super::*;

    fn wave(count: usize) -> Vec<[f64; 2]> {
        (0..count)
            .map(|index| index as f64 / count as f64)
            .map(|part| [part * 600.0, (part * 4000.0).sin()])
            .collect()
    }

    #[test]
    fn a_long_line_keeps_its_extremes_and_its_ends() {
        let mut line = wave(1_000_000);
        line[777_777][1] = 5.0;
        let kept = thinned(vec![line.clone()], 600.0);
        assert_eq!(kept.len(), 1);
        assert!(kept[0].len() <= MOST + 4, "{}", kept[0].len());
        assert_eq!((kept[0].first(), kept[0].last()), (line.first(), line.last()));
        assert!(kept[0].contains(&line[777_777]));
        assert!(kept[0].is_sorted_by(|one, next| one[0] < next[0]));
    }

    #[test]
    fn a_gap_of_a_column_stays_a_gap_and_a_narrower_one_closes() {
        let line = wave(10_000);
        let parts = |gap: usize| vec![line[..5000].to_vec(), line[5000 + gap..].to_vec()];
        assert_eq!(thinned(parts(100), 600.0).len(), 2);
        assert_eq!(thinned(parts(2), 600.0).len(), 1);
        let lonely: Vec<Vec<[f64; 2]>> = line.iter().map(|point| vec![*point]).collect();
        assert!(thinned(lonely, 600.0).len() <= MOST);
    }

    #[test]
    fn a_band_never_gets_narrower() {
        let band: Vec<[f64; 3]> = wave(50_000).iter().map(|[x, y]| [*x, y + 1.0, y - 1.0]).collect();
        let kept = thinned_band(vec![band.clone()], 600.0);
        assert!(kept[0].len() <= MOST + 2);
        for [x, low, high] in band {
            let next = kept[0].partition_point(|[kept, _, _]| *kept < x).min(kept[0].len() - 1);
            assert!(kept[0][next][1] >= low && kept[0][next][2] <= high);
        }
    }

    #[test]
    fn a_short_line_is_left_alone() {
        assert_eq!(thinned(vec![wave(2000)], 600.0), vec![wave(2000)]);
    }
}
