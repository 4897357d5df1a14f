//! What the session offers at a cursor, and what it says about the thing there.

use std::fs;
use std::path::{Path, PathBuf};

use rhythmite::session::{Completion, CompletionKind, Completions, Inspection, Session, Subject};

/// Marks the cursor in a text.
const CURSOR: char = '‸';

fn folder() -> PathBuf {
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join("completion");
    fs::create_dir_all(folder.join("data/old")).unwrap();
    fs::write(folder.join("data/spots.csv"), "year,spots\n1900,3\n1901,4\n1902,5\n").unwrap();
    fs::write(folder.join("data/späte.csv"), "").unwrap();
    fs::write(folder.join("data/.hidden"), "").unwrap();
    fs::write(folder.join("notes.txt"), "").unwrap();
    folder
}

/// A session with a few definitions, on two threads.
fn session() -> Session {
    let mut session = Session::with_limits(folder(), Some(2), 64 << 20, 1 << 20);
    let text = "clock = 1900..1902 CE by 1 yr\nsun = constant(0.5 ± 0.1 W/m2)\nsulfate = constant(-1 W/m2)\n\
                natural = compose(sun, sulfate)\ndamped(x, tau) = x |> smooth(tau) |> scale(0.8)\nlayer_depth = 30 m\n";
    let reply = session.run_cell("in 1", text);
    assert!(reply.problems.is_empty() && reply.waiting.is_empty(), "{reply:?}");
    session
}

fn at_mark(text: &str) -> (String, usize) {
    let cursor = text.find(CURSOR).unwrap();
    (text.replace(CURSOR, ""), cursor)
}

fn complete(session: &Session, text: &str) -> Completions {
    let (text, cursor) = at_mark(text);
    let found = session.complete(&text, cursor);
    assert!(found.start <= found.end && found.end == cursor && text.get(found.start..found.end).is_some());
    found
}

fn texts(found: &Completions) -> Vec<&str> {
    found.items.iter().map(|item| item.text.as_str()).collect()
}

#[test]
fn exactly_these_are_offered() {
    let session = session();
    let mut wrong = Vec::new();
    for (text, expected) in [
        // Functions and names.
        ("su‸", &["sulfate", "sun"][..]),
        ("x = sta‸", &["standardise("]),
        ("x = damp‸", &["damped("]),
        ("sun |> dam‸", &["damped("]),
        ("sun |> su‸", &[]),
        ("sun |> la‸(3)", &["lag"]),
        ("SUN‸", &["sun"]),
        // Another word finds the function where nothing begins so.
        ("sun |> regrid‸", &["on("]),
        // A word that is broken off stands for what is before the cursor.
        ("su‸lfate", &["sulfate", "sun"]),
        // Arguments of the call at the cursor that are not given yet.
        ("smooth(sun, 5 yr, w‸", &["window:"]),
        ("smooth(sun, w‸", &["width:", "window:", "within(", "without("]),
        ("smooth(sun, 5 yr, window: gaussian, e‸", &["ends:"]),
        ("sun |> smooth(5 yr, w‸", &["window:"]),
        ("smooth(sun, 5 yr, wi‸: gaussian)", &["window"]),
        ("splice(sun, sulfate, adj‸", &["adjust:"]),
        ("damped(sun, t‸", &["tau:", "table(", "two_layer("]),
        ("damped(sun, tau: t‸", &["table(", "two_layer("]),
        // Choices, by label and by position, and the arguments of a choice.
        ("smooth(sun, 5 yr, window: ‸", &["running_mean", "gaussian"]),
        ("smooth(sun, 5 yr, window: g‸)", &["gaussian"]),
        ("smooth(sun, 5 yr, g‸)", &["gaussian"]),
        ("sun |> smooth(5 yr, ‸", &["window:", "ends:", "running_mean", "gaussian"]),
        ("attribute(r, to: sun, noise: ‸", &["white", "ar1("]),
        ("attribute(r,\n  to: sun,\n  noise: ar1(0.5, p‸", &["per:", "pulse("]),
        // Months.
        ("season(sun, Dec‸", &["December"]),
        ("sun |> season(December..Feb‸", &["February"]),
        ("sun |> season(months: J‸", &["January", "June", "July"]),
        // Units and eras, after numbers, lists and `in`.
        (
            "x = 5 W/m‸",
            &[
                "m", "min", "month", "mol", "mm", "mg", "ms", "mK", "mmol", "mrad", "mHz", "mN", "mPa", "mJ",
                "mW",
            ],
        ),
        ("x = 3 deg‸", &["degC", "deg"]),
        ("x = sun in mW‸", &["mW"]),
        ("x = sun in w‸", &["W", "W*yr/m2/K", "W/m2", "W/m2/K"]),
        ("x = [1, 2] perm‸", &["permil"]),
        ("x = 450 cal‸", &["cal BP"]),
        ("clock = 1900..1950 CE by 5 m‸", &["min", "month", "ms"]),
        ("lag(sun, 4 mo‸", &["month"]),
        ("splice(sun, sulfate, at: 1920 ‸", &["CE", "BCE", "ka", "Ma", "cal BP", "b2k"]),
        ("two_layer(feedback: 1.2 W‸", &["W/m2/K"]),
        ("clock = 1900..1950 CE b‸", &["by"]),
        ("sun i‸", &["in"]),
        ("[x f‸", &["for"]),
        // Files, inside the text that names one and nowhere else.
        ("load(\"‸", &["data/", "notes.txt\""]),
        ("load(\"data/‸", &["old/", "spots.csv\"", "späte.csv\""]),
        ("x = load(\"data/spo‸\", value: \"spots\")", &["spots.csv"]),
        ("load(file: \"n‸", &["notes.txt\""]),
        ("load(\"../‸", &[]),
        ("load(\"/‸", &[]),
        ("load(\"data/spots.csv\", value: \"‸", &[]),
        ("scale(\"‸", &[]),
        ("x = \"sun‸", &[]),
        // Nothing in comments, closed texts, numbers, and where a name is made.
        ("x = 3 # su‸", &[]),
        ("x = \"sun\"‸", &[]),
        ("x = 12‸", &[]),
        ("[s for s‸", &[]),
        // What the text itself gives a name to.
        ("later = 3 m\ny = lat‸", &["later"]),
        ("y = halve‸\nhalved(x) = x / 2", &["halved("]),
        ("half(series_of_mine) = seri‸", &["series_of_mine", "series("]),
        ("[scale(sun, factor_here‸) for factor_here in [1, 2]]", &["factor_here"]),
        // After mistakes and in unfinished texts.
        ("x = )) ? \"open\ny = smooth(sun, 5 yr, window: ga‸", &["gaussian"]),
        ("f(1, [2, (su‸", &["sulfate", "sun"]),
        // Letters of several bytes before the cursor.
        ("x = 5 µm # Größe\nwärme = 18 ± 4 °C\ny = wä‸", &["wärme"]),
        ("größe = 3 ± 1 degC\nsmooth(größe, 5 yr, window: ga‸", &["gaussian"]),
        ("x = 3 µ‸", &[]),
    ] {
        let found = complete(&session, text);
        if texts(&found) != expected {
            wrong.push(format!("{text}: {:?} instead of {expected:?}", texts(&found)));
        }
    }
    assert!(wrong.is_empty(), "\n{}", wrong.join("\n"));
}

#[test]
fn an_empty_operand_offers_names_and_functions() {
    let session = session();
    for text in ["‸", "x = ‸", "x = 1 + ‸", "scale(‸", "[‸", "x = (‸", "x = 2\n‸"] {
        let found = complete(&session, text);
        for expected in ["sun", "natural", "members", "smooth(", "damped("] {
            assert!(texts(&found).contains(&expected), "{text} lacks {expected}: {found:?}");
        }
    }
    let piped = complete(&session, "sun |> ‸");
    assert!(piped.items.iter().all(|item| item.kind == CompletionKind::Function) && piped.items.len() > 20);
}

#[test]
fn every_argument_and_choice_of_every_entry_is_offered_in_a_call() {
    let session = session();
    for entry in rhythmite::catalogue::entries() {
        if entry.room == rhythmite::catalogue::Room::Operators {
            continue;
        }
        let text = format!("{}(", entry.name);
        let found = session.complete(&text, text.len());
        for parameter in entry.signature.parameters {
            let repeated = matches!(parameter.presence, rhythmite::language::Presence::Repeated { .. });
            let label = format!("{}:", parameter.name);
            assert_eq!(texts(&found).contains(&label.as_str()), !repeated, "{text} {label}");
            let text = format!("{}({label} ", entry.name);
            let offered = session.complete(&text, text.len());
            for choice in parameter.choices {
                let with = format!("{}(", choice.name);
                let found = texts(&offered);
                assert!(
                    found.contains(&choice.name) || found.contains(&with.as_str()),
                    "{text} {}",
                    choice.name
                );
            }
        }
    }
}

#[test]
fn what_is_taken_by_completion_can_be_read() {
    // Completing every prefix of a right program, wherever something is offered, never breaks off inside a code point
    // and always replaces the end of what is written.
    let session = session();
    let text = "größe = load(\"data/spots.csv\", value: \"spots\") |> smooth(5 yr, window: gaussian) # ± Ende\n\
                x = [scale(größe, e) for e in [0.9, 1.1]]\n18 ± 4 µm in km\nlag(größe, 4 month)";
    for cursor in 0..=text.len() + 3 {
        for whole in [text, text.get(..cursor).unwrap_or(text)] {
            let found = session.complete(whole, cursor);
            assert!(whole.get(found.start..found.end).is_some(), "{cursor}");
            for Completion { text: item, detail, .. } in &found.items {
                assert!(!item.is_empty() && !detail.is_empty(), "{cursor} {item}");
            }
            let _ = session.inspect(whole, cursor);
        }
    }
}

#[test]
fn the_place_that_is_replaced_is_the_word_alone() {
    let session = session();
    for (text, replaced) in [
        ("größe = su‸", "su"),
        ("x = 5 W/m‸", "m"),
        ("load(\"data/spo‸", "spo"),
        ("smooth(sun, wi‸ndow: gaussian)", "wi"),
        ("x = ‸", ""),
    ] {
        let (plain, _) = at_mark(text);
        let found = complete(&session, text);
        assert_eq!(plain.get(found.start..found.end), Some(replaced), "{text}");
    }
}

fn inspect(session: &Session, text: &str) -> Option<Inspection> {
    let (text, cursor) = at_mark(text);
    session.inspect(&text, cursor)
}

#[test]
fn a_thing_at_the_cursor_is_told_by_its_kind() {
    let session = session();
    for (text, subject, says) in [
        ("smo‸oth(sun, 5 yr)", Subject::Function, "window: running_mean"),
        ("smooth‸(sun, 5 yr)", Subject::Function, "window: running_mean"),
        ("smooth(‸", Subject::Function, "window: running_mean"),
        ("smooth(sun, ‸", Subject::Function, "window: running_mean"),
        ("damped‸(sun, 5 yr)", Subject::OwnFunction, "damped(x, tau) = x |> smooth(tau) |> scale(0.8)"),
        ("natural‸", Subject::Name, "natural = compose(sun, sulfate)"),
        ("1 + natu‸ral", Subject::Name, "a bundle"),
        ("smooth(sun, 5 yr, win‸dow: gaussian)", Subject::Argument, "running_mean"),
        ("smooth(sun, 5 yr, window: gauss‸ian)", Subject::Choice, "Gaussian weights"),
        ("damped(x‸: sun)", Subject::Argument, "a parameter of `damped`"),
        ("x = 5 W/m‸2", Subject::Unit, "watt"),
        ("x = 5 k‸yr", Subject::Unit, "10^3 yr"),
        ("x = 21 k‸a", Subject::Era, "thousand years before 1950"),
        ("mem‸bers", Subject::Setting, "ensemble"),
        ("clo‸ck", Subject::Name, "a clock"),
        ("18 ±‸ 4", Subject::Sign, "random"),
        ("größe = 3 µm ± 1\nlayer_‸depth", Subject::Name, "a quantity in m"),
    ] {
        let found = inspect(&session, text).unwrap_or_else(|| panic!("nothing at {text}"));
        assert_eq!(found.subject, subject, "{text}: {found:?}");
        assert!(found.text.contains(says), "{text}\n{}", found.text);
        assert!(!found.summary.is_empty());
    }
    for text in ["# smo‸oth(sun)", "x = \"natu‸ral\"", "unknown‸", "‸", "[e‸ for e in [1]]"] {
        assert_eq!(inspect(&session, text), None, "{text}");
    }
}

#[test]
fn a_name_says_where_it_lives_and_what_hangs_on_it() {
    let mut session = session();
    session.run_cell("in 2", "warm = damped(natural, 3 yr)\nwarm");
    let natural = session.explain("natural").unwrap();
    for line in
        ["kind         a bundle", "home         in 1", "depends on   sun, sulfate", "used by      warm"]
    {
        assert!(natural.text.contains(line), "{line}\n{}", natural.text);
    }
    let warm = session.explain("warm").unwrap().text;
    assert!(
        warm.contains("depends on   damped(…), natural") && warm.contains("used by      what in 2 shows"),
        "{warm}"
    );
    let print = |session: &Session, name: &str| {
        let text = session.explain(name).unwrap().text;
        text.lines().find_map(|line| line.trim().strip_prefix("fingerprint")).unwrap().trim().to_owned()
    };
    let (natural, depth) = (print(&session, "natural"), print(&session, "layer_depth"));
    assert_eq!(natural.len(), 12);
    session.run_cell("in 3", "sun = constant(0.7 W/m2)");
    assert_ne!(print(&session, "natural"), natural);
    assert_eq!(print(&session, "layer_depth"), depth);
    assert!(session.explain("sun").unwrap().text.contains("home         in 3; also defined in in 1"));
}

#[test]
fn a_broken_name_says_what_is_wrong_with_it() {
    let mut session = session();
    session.run_cell("in 2", "wrong = sun + layer_depth");
    let found = session.explain("wrong").unwrap();
    assert!(
        found.text.contains("not known: ") && found.text.contains("measure different things"),
        "{}",
        found.text
    );
    assert!(session.in_force().iter().any(|found| found.name == "wrong" && found.fault.is_some()));
    assert!(session.in_force().iter().any(|found| found.name == "damped(x, tau)" && found.fault.is_none()));
}

#[cfg(unix)]
#[test]
fn links_out_of_the_folder_are_not_offered() {
    let base = Path::new(env!("CARGO_TARGET_TMPDIR")).join("completion-links");
    let _ = fs::remove_dir_all(&base);
    fs::create_dir_all(base.join("outside")).unwrap();
    fs::create_dir_all(base.join("inside")).unwrap();
    fs::write(base.join("outside/secret.csv"), "").unwrap();
    fs::write(base.join("inside/mine.csv"), "").unwrap();
    std::os::unix::fs::symlink(base.join("outside"), base.join("inside/folder")).unwrap();
    std::os::unix::fs::symlink(base.join("outside/secret.csv"), base.join("inside/link.csv")).unwrap();
    let session = Session::with_limits(base.join("inside"), Some(1), 1 << 20, 1 << 20);
    assert_eq!(texts(&complete(&session, "load(\"‸")), ["mine.csv\""]);
    assert_eq!(texts(&complete(&session, "load(\"folder/‸")), [] as [&str; 0]);
}
