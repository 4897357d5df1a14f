use super::*;
use crate::base::Cancellation;
use proptest::prelude::*;

/// Edges of consecutive steps.
fn edges(start: f64, step: f64, count: usize) -> (Vec<f64>, Vec<f64>) {
    let edge = |index: usize| start + step * index as f64;
    ((0..count).map(edge).collect(), (1..=count).map(edge).collect())
}

fn times(start: f64, step: f64, count: usize) -> Vec<f64> {
    (0..count).map(|index| start + step * index as f64).collect()
}

fn steps<'times>((starts, ends): &'times (Vec<f64>, Vec<f64>)) -> Axis<'times> {
    Axis::Steps { starts, ends }
}

/// The values of `source` on `target`, NaN being a gap, with the customary longest gap.
fn resampled(source: Axis<'_>, values: &[f64], target: Axis<'_>) -> Result<Vec<f64>, ResampleError> {
    bridged(source, values, target, 3.0 * source.median_spacing_years().unwrap_or(0.0))
}

fn bridged(
    source: Axis<'_>,
    values: &[f64],
    target: Axis<'_>,
    longest_gap_years: f64,
) -> Result<Vec<f64>, ResampleError> {
    let valid: Vec<bool> = values.iter().map(|value| value.is_finite()).collect();
    let plan = Plan::new(source, &valid, target, longest_gap_years)?;
    let mut out = vec![0.0; target.len()];
    plan.apply(values, &mut out)?;
    Ok(out)
}

/// Equal to rounding, gaps where gaps are expected.
fn assert_values(found: &[f64], expected: &[f64]) {
    assert_eq!(found.len(), expected.len());
    for (index, (found, expected)) in found.iter().zip(expected).enumerate() {
        let equal = (found - expected).abs() < 1e-9 || (found.is_nan() && expected.is_nan());
        assert!(equal, "value {index}: {found} against {expected}");
    }
}

const GAP: f64 = f64::NAN;

#[test]
fn coarser_steps_are_overlap_weighted_means() -> Result<(), ResampleError> {
    let found =
        resampled(steps(&edges(0.0, 1.0, 6)), &[1.0, 3.0, 5.0, 7.0, 9.0, 11.0], steps(&edges(0.0, 1.5, 4)))?;
    assert_values(&found, &[5.0 / 3.0, 13.0 / 3.0, 23.0 / 3.0, 31.0 / 3.0]);
    Ok(())
}

#[test]
fn finer_steps_follow_the_line_through_mid_points_and_hold_the_ends() -> Result<(), ResampleError> {
    // The line is 1 until 5, rises to 3 at 15 and holds to 20.
    let found = resampled(steps(&edges(0.0, 10.0, 2)), &[1.0, 3.0], steps(&edges(0.0, 2.5, 8)))?;
    assert_values(&found, &[1.0, 1.0, 1.25, 1.75, 2.25, 2.75, 3.0, 3.0]);
    let found = resampled(
        steps(&edges(0.0, 10.0, 2)),
        &[1.0, 3.0],
        Axis::Instants { times: &[-1.0, 0.0, 5.0, 6.0, 15.0, 20.0, 20.5] },
    )?;
    assert_values(&found, &[GAP, 1.0, 1.0, 1.2, 3.0, 3.0, GAP]);
    Ok(())
}

#[test]
fn steps_take_the_exact_mean_of_the_line_through_instants() -> Result<(), ResampleError> {
    // From 0 to 1 the mean of the tent with its top at 0.5 is 0.5; from 1 to 2 the line is zero.
    let source = Axis::Instants { times: &[0.0, 0.5, 1.0, 2.0] };
    let found = resampled(source, &[0.0, 1.0, 0.0, 0.0], steps(&edges(0.0, 1.0, 2)))?;
    assert_values(&found, &[0.5, 0.0]);
    let found = resampled(source, &[0.0, 1.0, 0.0, 0.0], steps(&edges(0.0, 0.25, 4)))?;
    assert_values(&found, &[0.25, 0.75, 0.75, 0.25]);
    Ok(())
}

#[test]
fn coarser_instants_are_means_over_their_cells() -> Result<(), ResampleError> {
    let fine = times(0.0, 1.0, 41);
    let values: Vec<f64> = fine.iter().map(|time| (time - 20.0).abs()).collect();
    let found =
        resampled(Axis::Instants { times: &fine }, &values, Axis::Instants { times: &[10.0, 20.0, 30.0] })?;
    // Cells 5..15, 15..25 and 25..35 of |t − 20|.
    assert_values(&found, &[10.0, 2.5, 10.0]);
    let found = resampled(
        steps(&edges(0.0, 1.0, 40)),
        &times(0.0, 1.0, 40),
        Axis::Instants { times: &[10.0, 20.0, 30.0] },
    )?;
    assert_values(&found, &[9.5, 19.5, 29.5]);
    Ok(())
}

#[test]
fn the_outermost_cells_end_where_the_source_ends() -> Result<(), ResampleError> {
    let fine = times(0.0, 1.0, 21);
    let found =
        resampled(Axis::Instants { times: &fine }, &fine, Axis::Instants { times: &[0.0, 10.0, 20.0] })?;
    assert_values(&found, &[2.5, 10.0, 17.5]);
    let found = resampled(
        Axis::Instants { times: &fine },
        &fine,
        Axis::Instants { times: &[-10.0, 0.0, 10.0, 20.0, 30.0] },
    )?;
    assert_values(&found, &[GAP, GAP, 10.0, GAP, GAP]);
    Ok(())
}

#[test]
fn two_thirds_of_a_step_are_enough_and_less_is_not() -> Result<(), ResampleError> {
    let (source, target) = (edges(0.0, 1.0, 9), edges(0.0, 3.0, 4));
    let values = [1.0, 2.0, GAP, GAP, 5.0, GAP, 7.0, 8.0, 9.0];
    let valid: Vec<bool> = values.iter().map(|value| value.is_finite()).collect();
    let plan = Plan::new(steps(&source), &valid, steps(&target), 3.0)?;
    let mut out = [0.0; 4];
    plan.apply(&values, &mut out)?;
    assert_values(&out, &[1.5, GAP, 8.0, GAP]);
    assert_eq!((plan.partly_covered(), plan.too_little_covered(), plan.not_covered()), (1, 1, 1));
    Ok(())
}

#[test]
fn a_gap_is_bridged_up_to_the_longest_and_not_beyond() -> Result<(), ResampleError> {
    let (source, values) = (times(0.0, 1.0, 8), [0.0, 1.0, GAP, GAP, 4.0, GAP, GAP, 7.0]);
    let valid: Vec<bool> = values.iter().map(|value| value.is_finite()).collect();
    let target = [0.5, 2.5, 4.0, 5.5, 7.0];
    for (longest_gap, expected) in
        [(3.0, [0.5, 2.5, 4.0, 5.5, 7.0]), (2.9, [0.5, GAP, 4.0, GAP, 7.0]), (0.0, [GAP, GAP, 4.0, GAP, 7.0])]
    {
        // A coarse neighbour would make cells of these targets, so each is asked alone.
        for (&time, &value) in target.iter().zip(&expected) {
            let plan = Plan::new(
                Axis::Instants { times: &source },
                &valid,
                Axis::Instants { times: &[time] },
                longest_gap,
            )?;
            let mut out = [0.0];
            plan.apply(&values, &mut out)?;
            assert_values(&out, &[value]);
        }
    }
    Ok(())
}

#[test]
fn finer_steps_bridge_a_short_gap_between_steps_and_keep_a_long_one() -> Result<(), ResampleError> {
    let (source, target) = (edges(0.0, 4.0, 4), edges(0.0, 2.0, 8));
    let values = [1.0, GAP, GAP, 7.0];
    let valid = [true, false, false, true];
    let mut out = [0.0; 8];
    Plan::new(steps(&source), &valid, steps(&target), 8.0)?.apply(&values, &mut out)?;
    assert_values(&out, &[1.0, 1.5, 2.5, 3.5, 4.5, 5.5, 6.5, 7.0]);
    Plan::new(steps(&source), &valid, steps(&target), 7.9)?.apply(&values, &mut out)?;
    assert_values(&out, &[1.0, 1.0, GAP, GAP, GAP, GAP, 7.0, 7.0]);
    Ok(())
}

#[test]
fn months_of_unlike_length_are_averaged_throughout() -> Result<(), ResampleError> {
    let mut day = 0.0;
    let (mut starts, mut ends) = (Vec::new(), Vec::new());
    for days in [31.0, 28.0, 31.0, 30.0, 31.0, 30.0, 31.0, 31.0, 30.0, 31.0, 30.0, 31.0] {
        starts.push(day / 365.0);
        day += days;
        ends.push(day / 365.0);
    }
    let values: Vec<f64> = (0..12_u32).map(|month| f64::from(month * month % 7)).collect();
    let twelfths = edges(0.0, 1.0 / 12.0, 12);
    let found = resampled(Axis::Steps { starts: &starts, ends: &ends }, &values, steps(&twelfths))?;
    let before: f64 =
        starts.iter().zip(&ends).zip(&values).map(|((start, end), value)| (end - start) * value).sum();
    assert!((found.iter().sum::<f64>() / 12.0 - before).abs() < 1e-12);
    Ok(())
}

#[test]
fn a_source_step_that_is_a_target_step_comes_back_bit_for_bit() -> Result<(), ResampleError> {
    let (source, target) = (edges(1850.0, 0.1, 30), edges(1850.0 + 0.1 * 7.0, 0.1, 5));
    let values: Vec<f64> = (0..30).map(|index| (f64::from(index) * 1.7).sin()).collect();
    let found = resampled(steps(&source), &values, steps(&target))?;
    for (found, expected) in found.iter().zip(&values[7..]) {
        assert_eq!(found.to_bits(), expected.to_bits());
    }
    Ok(())
}

#[test]
fn axes_out_of_order_are_refused_with_side_and_place() {
    let fine = times(0.0, 1.0, 4);
    let instants = Axis::Instants { times: &fine };
    let refuse = |source, valid: &[bool], target| Plan::new(source, valid, target, 3.0).err();
    let bad = Axis::Instants { times: &[0.0, 2.0, 2.0] };
    assert_eq!(
        refuse(bad, &[true; 3], instants),
        Some(ResampleError::NotAscending { side: Side::Source, index: 2 })
    );
    assert_eq!(
        refuse(instants, &[true; 4], bad),
        Some(ResampleError::NotAscending { side: Side::Target, index: 2 })
    );
    let bad = Axis::Instants { times: &[0.0, f64::NAN] };
    assert_eq!(
        refuse(instants, &[true; 4], bad),
        Some(ResampleError::NotFinite { side: Side::Target, index: 1 })
    );
    let bad = Axis::Steps { starts: &[0.0, 0.5], ends: &[1.0, 2.0] };
    assert_eq!(
        refuse(bad, &[true; 2], instants),
        Some(ResampleError::Overlapping { side: Side::Source, index: 1 })
    );
    let bad = Axis::Steps { starts: &[0.0, 2.0], ends: &[1.0, 2.0] };
    assert_eq!(
        refuse(bad, &[true; 2], instants),
        Some(ResampleError::NotAscending { side: Side::Source, index: 1 })
    );
    let bad = Axis::Steps { starts: &[0.0, 2.0], ends: &[1.0] };
    let mismatch = Some(ResampleError::LengthMismatch { expected: 2, found: 1 });
    assert_eq!(refuse(bad, &[true; 2], instants), mismatch);
    let mismatch = Some(ResampleError::LengthMismatch { expected: 4, found: 2 });
    assert_eq!(refuse(instants, &[true; 2], instants), mismatch);
    assert_eq!(Plan::new(instants, &[true; 4], instants, -1.0).err(), Some(ResampleError::LongestGap(-1.0)));
}

#[test]
fn members_are_resampled_one_by_one_and_stop_when_asked() -> Result<(), ResampleError> {
    let (source, target) = (edges(0.0, 1.0, 4), edges(0.0, 2.0, 2));
    let plan = Plan::new(steps(&source), &[true; 4], steps(&target), 3.0)?;
    let cancellation = Cancellation::new();
    let mut out = [0.0; 4];
    plan.apply_to_members(&[0.0, 2.0, 4.0, 6.0, 10.0, 10.0, 20.0, 40.0], &mut out, &cancellation)?;
    assert_values(&out, &[1.0, 5.0, 10.0, 30.0]);
    let mismatch = ResampleError::LengthMismatch { expected: 8, found: 7 };
    assert_eq!(plan.apply_to_members(&[0.0; 7], &mut out, &cancellation), Err(mismatch));
    cancellation.cancel();
    assert_eq!(plan.apply_to_members(&[0.0; 8], &mut out, &cancellation), Err(ResampleError::Cancelled));
    Ok(())
}

#[test]
fn empty_axes_give_empty_answers() -> Result<(), ResampleError> {
    let none = Axis::Instants { times: &[] };
    assert!(resampled(none, &[], none)?.is_empty());
    assert_values(&resampled(none, &[], Axis::Instants { times: &[1.0, 2.0] })?, &[GAP, GAP]);
    assert!(resampled(Axis::Instants { times: &[1.0] }, &[1.0], none)?.is_empty());
    assert_values(&resampled(none, &[], steps(&edges(0.0, 1.0, 2)))?, &[GAP, GAP]);
    Ok(())
}

#[test]
fn a_million_irregular_instants_are_planned_in_one_pass() -> Result<(), ResampleError> {
    let mut time = 0.0;
    let source: Vec<f64> = (0..1_000_000_u32)
        .map(|index| {
            time += 0.1 + f64::from(index.wrapping_mul(2_654_435_761) >> 16) / 65_536.0;
            time
        })
        .collect();
    let target = edges(0.0, 100.0, 5000);
    let begun = std::time::Instant::now();
    let found = resampled(Axis::Instants { times: &source }, &source, steps(&target))?;
    // A pass takes tens of milliseconds; comparing every point with every target would take a minute.
    assert!(begun.elapsed().as_secs_f64() < 5.0, "{:?}", begun.elapsed());
    assert!((found[2500] - 250_050.0).abs() < 1e-6);
    Ok(())
}

/// An ascending axis of irregular spacing.
fn irregular() -> impl Strategy<Value = Vec<f64>> {
    (-5.0..5.0_f64, prop::collection::vec(0.2..1.8_f64, 5..60)).prop_map(|(start, spacings)| {
        let mut time = start;
        std::iter::once(start)
            .chain(spacings.into_iter().map(|spacing| {
                time += spacing;
                time
            }))
            .collect()
    })
}

/// Both kinds of axis over the same times.
fn both_kinds(times: &[f64]) -> [Axis<'_>; 2] {
    [Axis::Instants { times }, Axis::Steps { starts: &times[..times.len() - 1], ends: &times[1..] }]
}

fn tried<T>(result: Result<T, ResampleError>) -> Result<T, TestCaseError> {
    result.map_err(|error| TestCaseError::fail(format!("{error:?}")))
}

proptest! {
    #[test]
    fn a_constant_stays_that_constant(source in irregular(), target in irregular(), constant in -1e3..1e3_f64) {
        for source in both_kinds(&source) {
            for target in both_kinds(&target) {
                for value in tried(resampled(source, &vec![constant; source.len()], target))? {
                    prop_assert!(value.is_nan() || value.to_bits() == constant.to_bits());
                }
            }
        }
    }

    #[test]
    fn equal_axes_give_back_the_same_bits(axis in irregular(), gaps in prop::collection::vec(any::<bool>(), 61)) {
        for axis in both_kinds(&axis) {
            let values: Vec<f64> = (0..axis.len())
                .map(|index| if gaps[index] { GAP } else { -(index as f64 * 0.3).sin() })
                .collect();
            for (found, expected) in tried(resampled(axis, &values, axis))?.iter().zip(&values) {
                prop_assert!(found.to_bits() == expected.to_bits() || (found.is_nan() && expected.is_nan()));
            }
        }
    }

    #[test]
    fn a_straight_line_through_instants_stays_itself_when_refined(source in irregular(), parts in 3..7_usize) {
        let values: Vec<f64> = source.iter().map(|time| 3.0 * time - 1.0).collect();
        let spacing = 0.2 / parts as f64;
        let (first, last) = (source[0], source[source.len() - 1]);
        let target = times(first, spacing, ((last - first) / spacing) as usize);
        let found = tried(bridged(
            Axis::Instants { times: &source },
            &values,
            Axis::Instants { times: &target },
            f64::INFINITY,
        ))?;
        for (found, time) in found.iter().zip(&target) {
            prop_assert!((found - (3.0 * time - 1.0)).abs() < 1e-12 * (1.0 + time.abs()));
        }
        let target = edges(first, spacing, target.len() - 1);
        let found = tried(bridged(Axis::Instants { times: &source }, &values, steps(&target), f64::INFINITY))?;
        for (found, (start, end)) in found.iter().zip(target.0.iter().zip(&target.1)) {
            prop_assert!((found - (3.0 * f64::midpoint(*start, *end) - 1.0)).abs() < 1e-12 * (1.0 + end.abs()));
        }
    }

    #[test]
    fn coarsening_steps_conserves_the_mean(source in irregular(), parts in 1..4_usize) {
        let [_, axis] = both_kinds(&source);
        let values: Vec<f64> = (0..axis.len()).map(|index| (index as f64 * 1.3).sin()).collect();
        let (first, last) = (source[0], source[source.len() - 1]);
        // No source step is longer than 1.8.
        let count = ((last - first) / 2.0 / parts as f64) as usize;
        prop_assume!(count > 0);
        let target = edges(first, (last - first) / count as f64, count);
        let found = tried(resampled(axis, &values, steps(&target)))?;
        let before: f64 = values.iter().zip(source.windows(2)).map(|(value, pair)| value * (pair[1] - pair[0])).sum();
        let after: f64 = found.iter().sum::<f64>() * (last - first) / count as f64;
        prop_assert!((before - after).abs() < 1e-9);
    }

    #[test]
    fn weights_sum_to_one_and_reach_no_further_than_the_data(source in irregular(), target in irregular()) {
        for source in both_kinds(&source) {
            for target in both_kinds(&target) {
                let valid = vec![true; source.len()];
                let plan = tried(Plan::new(source, &valid, target, 3.0))?;
                for index in 0..target.len() {
                    let entries: Vec<(usize, f64)> = plan.entries(index).collect();
                    let sum: f64 = entries.iter().map(|entry| entry.1).sum();
                    prop_assert!(entries.is_empty() || (sum - 1.0).abs() < 1e-12);
                    prop_assert!(entries.iter().all(|entry| entry.1 >= 0.0));
                    prop_assert!(entries.windows(2).all(|pair| pair[0].0 < pair[1].0));
                }
            }
        }
    }
}
