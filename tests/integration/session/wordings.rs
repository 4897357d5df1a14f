//! What messages and results say to the person who reads them.

use super::*;

/// The message and the help of the one mistake of a script.
fn told(text: &str) -> (String, String) {
    let reply = session().run_cell("script", text);
    let failed = reply.outputs.iter().filter_map(|output| output.result.as_ref().err());
    let problem = reply.problems.iter().chain(failed).next().unwrap_or_else(|| panic!("{text}\n{reply:#?}"));
    (problem.message.clone(), problem.help.clone().unwrap_or_default())
}

/// The lines that a script prints for its last result.
fn line(text: &str) -> String {
    rhythmite::display::line(results(text).last().unwrap())
}

#[test]
fn an_era_by_another_word_is_told_how_it_is_written() {
    for (text, message, help) in [
        ("300 BC", "`BC` is no era; it is written BCE here", "write `300 BCE`"),
        ("1850 AD", "`AD` is no era; it is written CE here", "write `1850 CE`"),
        ("44 bce", "`bce` is no era; it is written BCE here", "write `44 BCE`"),
        ("21 kya", "`kya` is no era; it is written ka here", "write `21 ka`"),
        ("800..0 Ka", "`Ka` is no era; it is written ka here", "write `ka`"),
        ("21 ka in BC", "`BC` is no era; it is written BCE here", "write `BCE`"),
    ] {
        assert_eq!(told(text), (message.to_owned(), help.to_owned()), "{text}");
    }
    // Where it cannot be read at all.
    assert_eq!(told("AD 300").1, "an era stands after its number: 300 CE");
    assert_eq!(told("x = BC 44..1").1, "an era stands after its number: 44 BCE");
    assert_eq!(told("21 kyr BP").1, "an age is written such as 21 ka, 2.7 Ma or 450 cal BP");
    // A name that is no era is multiplied by.
    assert!(told("T = 3\n5 T").1.contains("to multiply, write `5 * T`"));
}

#[test]
fn an_operand_is_quoted_instead_of_the_name_of_its_parameter() {
    for (text, message) in [
        ("x = 1850 CE\n2 * x", "`x` is an instant; `*` takes a quantity, a series or a bundle"),
        ("\"a\" + 1", "`\"a\"` is a text; `+` takes a quantity, a series, a bundle or an instant"),
        ("2^(1 m)", "`1 m` is a quantity in m, which does not convert to 1"),
    ] {
        assert_eq!(told(text).0, message, "{text}");
    }
    let long = format!("2 * [{}]", vec!["1"; 60].join(", "));
    assert!(told(&long).0.starts_with("this operand is a list"), "{}", told(&long).0);
    // Parameters of functions have names that are written.
    assert!(told("scale(1, 2)").0.starts_with("`series` is"));
}

#[test]
fn a_choice_by_another_word_is_told_the_right_one() {
    let series = "x = series([1, 2] m, along: 1850..1851 CE by 1 yr)\n";
    for (call, near) in [
        ("attribute(x, to: x, method: ols)", "did you mean `ordinary_least_squares`?"),
        ("attribute(x, to: x, method: GLS)", "did you mean `generalised_least_squares`?"),
        (
            "attribute(x, to: x, method: generalized_least_squares)",
            "did you mean `generalised_least_squares`?",
        ),
        ("smooth(x, 2 yr, window: boxcar)", "did you mean `running_mean`?"),
        ("smooth(x, 2 yr, window: gauss)", "did you mean `gaussian`?"),
        ("smooth(x, 2 yr, window: \"gaussian\")", "write `gaussian`"),
        ("on(x, 1850..1851 CE by 1 yr, method: spline)", "did you mean `monotone_cubic`?"),
        ("smooth(x, 2 yr, window: zzz)", "it takes running_mean, gaussian"),
    ] {
        let (_, help) = told(&format!("{series}{call}"));
        assert!(help.contains(near), "{call}: {help}");
    }
}

#[test]
fn what_came_as_a_date_is_shown_as_a_date() {
    assert_eq!(line("2015-06-15"), "2015-06-15");
    assert_eq!(line("2015-06-15 + 30 day"), "2015-07-15");
    assert_eq!(line("2015-06-15..2016-01-01"), "2015-06-15..2016-01-01");
    assert_eq!(line("2015 CE"), "2015 CE");
    // Who asks for an era wants the number.
    assert_eq!(line("2015-06-15 in CE"), "2015.452055 CE");
    let spread = line("2015-06-15 ± 20 day");
    assert!(spread.starts_with("2015-06-15 [2015-05-") && spread.contains(", 2015-07-"), "{spread}");
    let (message, _) = told("2016-01-01..2015-06-15");
    assert_eq!(message, "this span runs backwards: 2016-01-01 comes after 2015-06-15");
}

#[test]
fn a_table_of_dates_shows_dates() {
    let days = "x = series([1, 2, 3] mm, along: 2015-06-29..2015-07-01 by 1 day)\ntable(x)";
    let Shown::Table(table) = results(days).pop().unwrap() else { panic!() };
    assert_eq!(table.columns[0].name, "date");
    let text = rhythmite::display::text(&Shown::Table(table));
    assert!(text.contains("2015-06-29") && text.contains("2015-07-01") && !text.contains("2015.4"), "{text}");
    let folder = folder("dates");
    fs::write(folder.join("floods.csv"), "date,height (m)\n1991-06-15,2\n2015-06-15,3\n").unwrap();
    let mut session = Session::with_limits(&folder, Some(2), 64 << 20, 1 << 20);
    let reply = run(&mut session, "script", "e = events(load_table(\"floods.csv\"))\ne\ntable(e)");
    for output in reply.outputs {
        let text = rhythmite::display::text(&output.result.unwrap());
        assert!(
            text.contains("date") && text.contains("1991-06-15") && text.contains("2015-06-15"),
            "{text}"
        );
    }
    // Years stay years.
    let years = "table(series([1, 2] m, along: 1850..1851 CE by 1 yr))";
    let Shown::Table(table) = results(years).pop().unwrap() else { panic!() };
    assert_eq!(table.columns[0].name, "year CE");
}

#[test]
fn a_difference_of_two_forcings_keeps_its_kind_and_no_reference() {
    let clock = "clock = 1850..1851 CE by 1 yr\nx = constant(300 ppm) |> co2_forcing(reference: 278 ppm)\n";
    assert!(line(&format!("{clock}x")).ends_with("stratosphere-adjusted change from 278 ppm CO2"));
    let difference = line(&format!("{clock}x - x"));
    assert!(difference.contains("stratosphere-adjusted") && !difference.contains("from"), "{difference}");
}

#[test]
fn one_step_is_left_as_one_gap() {
    let text = "clock = 1850..1852 CE by 1 yr\nx = series([1, 2] m, along: 1850..1851 CE by 1 yr)\nx + constant(0 m)";
    let reply = run(&mut session(), "script", text);
    assert!(reply.outputs[0].notes.iter().any(|note| note.ends_with("1 step left as a gap")), "{reply:#?}");
}
