//! What a splice makes of the steps and instants of its two records.

use rhythmite::value::AxisKind;

use super::*;

/// Kind, first and last time, values, and what was done to the times, of a splice of two series at 1852 CE.
fn spliced(early: &str, late: &str, more: &str) -> (AxisKind, Vec<f64>, Vec<f64>, String) {
    let text = format!("early = {early}\nlate = {late}\nsplice(early, late, at: 1852 CE{more})");
    let reply = run(&mut session(), "script", &text);
    let note = reply.outputs[0].notes.iter().find(|note| note.contains("from then on")).unwrap();
    let note = note.split_once("; ").map_or("", |(_, done)| done).to_owned();
    let Shown::Series(series) = reply.outputs[0].result.as_ref().unwrap() else { panic!("{reply:#?}") };
    (series.axis.kind, series.axis.starts().to_vec(), series.nominal.clone(), note)
}

const EARLY: &str = "series([1, 2, 3] m, along: 1850..1852 CE by 1 yr)";

#[test]
fn steps_of_one_length_stay_steps_and_no_year_is_lost() {
    let (kind, times, values, note) = spliced(EARLY, "series([5, 6] m, along: 1852..1853 CE by 1 yr)", "");
    assert_eq!(
        (kind, times, values),
        (AxisKind::Steps, vec![1850.0, 1851.0, 1852.0, 1853.0], vec![1.0, 2.0, 5.0, 6.0])
    );
    assert_eq!(note, "steps stay steps");
    // On a clock of the same steps every value is where it was, the first and the last included.
    let text = format!(
        "clock = 1850..1853 CE by 1 yr\nearly = {EARLY}\nlate = series([5, 6] m, along: 1852..1853 CE by 1 yr)\n\
         splice(early, late, at: 1852 CE) + constant(0 m)"
    );
    assert_eq!(nominal(results(&text).last().unwrap()), [1.0, 2.0, 5.0, 6.0]);
}

#[test]
fn a_hole_between_steps_is_none_of_them_unless_it_is_to_be_bridged() {
    let late = "series([5, 6] m, along: 1855..1856 CE by 1 yr)";
    let (kind, times, _, note) = spliced(EARLY, late, "");
    assert_eq!((kind, times), (AxisKind::Steps, vec![1850.0, 1851.0, 1855.0, 1856.0]));
    assert_eq!(note, "steps stay steps");
    let (kind, times, _, note) = spliced(EARLY, late, ", longest_gap: 10 yr");
    assert_eq!((kind, times), (AxisKind::Instants, vec![1850.5, 1851.5, 1855.5, 1856.5]));
    assert!(note.ends_with("so that the gap between them can be bridged"), "{note}");
}

#[test]
fn steps_become_instants_where_they_do_not_fit_together() {
    for (late, says) in [
        ("series([5, 6] m, at: [1853 CE, 1854 CE])", "as the other has instants"),
        ("series([5, 6] m, along: 1852..1855 CE by 2 yr)", "as they differ in length"),
        ("lag(series([5, 6] m, along: 1851..1852 CE by 1 yr), 6 month)", "as they overlap there"),
    ] {
        let (kind, _, _, note) = spliced(EARLY, late, "");
        assert_eq!(kind, AxisKind::Instants, "{late}");
        assert!(note.ends_with(says), "{late}: {note}");
    }
    let instants = "series([1, 2] m, at: [1850 CE, 1851 CE])";
    let (kind, _, _, note) = spliced(instants, "series([5, 6] m, at: [1853 CE, 1854 CE])", "");
    assert_eq!((kind, note.as_str()), (AxisKind::Instants, ""));
}

#[test]
fn months_of_a_calendar_and_twelfths_of_a_year_are_steps_of_one_length() {
    let months =
        |year: u32| format!("series([{}] m, along: {year}..{year} CE by 1 month)", ["1"; 12].join(", "));
    let text = format!("a = {}\nb = {}\nsplice(a, b, at: 1851 CE)", months(1850), months(1851));
    let Shown::Series(series) = results(&text).pop().unwrap() else { panic!() };
    assert_eq!((series.axis.kind, series.axis.len()), (AxisKind::Steps, 24));
}
