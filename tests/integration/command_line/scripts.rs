//! Scripts of every kind of text and in every kind of folder, and the files that a script may not read.

use std::fs;
use std::path::Path;
#[cfg(target_os = "linux")]
use std::process::Command;

use super::{Run, finish, folder, program};

fn run_bytes(name: &str, bytes: &[u8]) -> Run {
    let folder = folder(name);
    fs::write(folder.join("s.rhy"), bytes).unwrap();
    finish(program().current_dir(folder).args(["run", "s.rhy"]))
}

fn run_in(folder: &Path, text: &str, arguments: &[&str]) -> Run {
    fs::write(folder.join("s.rhy"), text).unwrap();
    finish(program().current_dir(folder).args(["run", "s.rhy"]).args(arguments))
}

const ROWS: &str = "year,value\n1850,1\n1851,2\n1852,3\n";

#[test]
fn an_empty_script_shows_nothing_and_is_right() {
    for (name, text) in
        [("none", ""), ("lines", "\n\n \n"), ("comment", "# only words"), ("definition", "x = 1")]
    {
        let run = run_bytes(&format!("empty-{name}"), text.as_bytes());
        assert_eq!((run.code, run.out.as_str(), run.err.as_str()), (Some(0), "", ""), "{name}");
    }
}

#[test]
fn a_script_that_is_not_utf_8_is_told_with_the_wrong_byte() {
    let run = run_bytes("latin", b"x = 18 \xb1 4\n");
    assert_eq!(run.code, Some(2));
    assert!(run.err.contains("UTF-8") && run.err.contains('8'), "{}", run.err);
    assert!(run.out.is_empty());
    let utf_16: Vec<u8> = "x = 1\n".encode_utf16().flat_map(u16::to_le_bytes).collect();
    let run = run_bytes("utf-16", &[&[0xff, 0xfe][..], &utf_16].concat());
    assert_eq!(run.code, Some(2));
    assert!(run.err.contains("UTF-8"), "{}", run.err);
}

#[test]
fn line_ends_and_a_mark_at_the_beginning_change_nothing() {
    let text =
        "# µ\nx = series([1, 2, 3] ppm,\n  along: 1850..1852 CE by 1 yr)\nx\n  |> lag(1 yr)\n1 ± 0.1\n";
    let plain = run_bytes("ends-plain", text.as_bytes());
    assert_eq!(plain.code, Some(0), "{}", plain.out);
    let windows = run_bytes("ends-windows", text.replace('\n', "\r\n").as_bytes());
    assert_eq!(windows.out.replace('\r', ""), plain.out, "carriage returns");
    assert!(!windows.out.contains('\r'), "a carriage return stays in what is printed: {:?}", windows.out);
    let marked = run_bytes("ends-marked", format!("\u{feff}{text}").as_bytes());
    assert_eq!(marked.out, plain.out, "a byte order mark");
    let unended = run_bytes("ends-none", text.trim_end().as_bytes());
    assert_eq!(unended.out, plain.out, "no line end at the end");
}

#[test]
fn places_of_errors_are_the_same_with_every_line_end_and_after_a_mark() {
    let wrong = "x = 1\ny = \"±\"\n[y, nowhere]\n";
    let place = |name: &str, text: String| {
        let folder = folder(name);
        let run = run_in(&folder, &text, &["--format", "json"]);
        let json: serde_json::Value = serde_json::from_str(&run.out).unwrap();
        let error = &json["outputs"][0]["error"];
        (error["line"].as_u64().unwrap(), error["column"].as_u64().unwrap())
    };
    assert_eq!(place("place-plain", wrong.to_owned()), (3, 5));
    assert_eq!(place("place-windows", wrong.replace('\n', "\r\n")), (3, 5));
    let marked = "\u{feff}nowhere\n".to_owned();
    assert_eq!(place("place-marked", marked), (1, 1), "a mark is no column");
}

#[test]
fn stray_characters_are_told_where_they_stand() {
    for (name, text) in [
        ("zero", "x = 1\0\n"),
        ("bell", "x = \u{7}1\n"),
        ("wide", "x = 1\u{a0}+ 1 $\n"),
        ("quote", "\"open\n"),
    ] {
        let run = run_bytes(&format!("stray-{name}"), text.as_bytes());
        assert_eq!(run.code, Some(1), "{name} {run:?}");
        assert!(run.out.contains("error[") && run.out.contains("s.rhy:"), "{name} {}", run.out);
        assert!(
            !run.out.contains('\u{7}') && !run.out.contains('\0'),
            "{name}: control characters are not passed on"
        );
    }
}

#[test]
fn a_folder_with_spaces_and_letters_of_any_language_is_a_folder() {
    let folder = folder("Größe & Maß – 年輪 (2)");
    fs::create_dir_all(folder.join("dåta")).unwrap();
    fs::write(folder.join("dåta/järvi säte.csv"), ROWS).unwrap();
    fs::write(folder.join("mein skript µ.rhy"), "load(\"dåta/järvi säte.csv\", unit: \"ppm\")\nwrong +\n")
        .unwrap();
    let here = finish(program().current_dir(&folder).args(["run", "mein skript µ.rhy"]));
    assert!(here.out.contains("mein skript µ.rhy:2:"), "{}", here.out);
    fs::write(folder.join("mein skript µ.rhy"), "load(\"dåta/järvi säte.csv\", unit: \"ppm\")\n").unwrap();
    let here = finish(program().current_dir(&folder).args(["run", "mein skript µ.rhy"]));
    assert_eq!(here.code, Some(0), "{}", here.out);
    assert!(here.out.contains("3 steps, 1850 CE to 1852 CE"), "{}", here.out);
    let elsewhere = finish(program().current_dir("/").arg("run").arg(folder.join("mein skript µ.rhy")));
    assert_eq!(elsewhere.out, here.out, "paths begin at the script, wherever one stands");
}

#[test]
fn what_lies_outside_the_scripts_folder_is_not_read() {
    let outside = folder("outside");
    let inside = outside.join("inside");
    fs::create_dir_all(inside.join("sub")).unwrap();
    for place in [&outside, &inside, &inside.join("sub")] {
        fs::write(place.join("a.csv"), ROWS).unwrap();
    }
    let absolute = inside.join("a.csv").display().to_string();
    for path in ["../a.csv", "sub/../../a.csv", "sub/../a.csv", "/etc/passwd", &absolute, "..", "."] {
        let run = run_in(&inside, &format!("load(\"{path}\", unit: \"ppm\")\n"), &[]);
        assert_eq!(run.code, Some(1), "{path}");
        let refused = run.out.contains("error[file-outside]") || run.out.contains("error[file-kind]");
        assert!(refused, "{path}\n{}", run.out);
        assert!(!run.out.contains("root:"), "{path}");
    }
    for path in ["a.csv", "./a.csv", "sub/a.csv", "sub//a.csv"] {
        let run = run_in(&inside, &format!("load(\"{path}\", unit: \"ppm\")\n"), &[]);
        assert_eq!(run.code, Some(0), "{path}\n{}", run.out);
    }
}

#[test]
fn a_missing_file_is_offered_the_one_with_nearly_its_name() {
    let folder = folder("near-file");
    fs::create_dir_all(folder.join("data")).unwrap();
    fs::write(folder.join("data/spots.csv"), ROWS).unwrap();
    let run = run_in(&folder, "load(\"data/spot.csv\")\n", &[]);
    assert!(run.out.contains("error[file-missing]") && run.out.contains("data/spots.csv"), "{}", run.out);
}

#[cfg(unix)]
#[test]
fn a_link_out_of_the_folder_is_refused_and_one_inside_is_followed() {
    use std::os::unix::fs::symlink;
    let outside = folder("links");
    let inside = outside.join("inside");
    fs::create_dir_all(&inside).unwrap();
    fs::write(outside.join("secret.csv"), ROWS).unwrap();
    fs::write(inside.join("a.csv"), ROWS).unwrap();
    symlink("../secret.csv", inside.join("out.csv")).unwrap();
    symlink("..", inside.join("up")).unwrap();
    symlink("/etc/passwd", inside.join("passwd.csv")).unwrap();
    symlink("a.csv", inside.join("in.csv")).unwrap();
    symlink("loop.csv", inside.join("loop.csv")).unwrap();
    symlink("nowhere.csv", inside.join("dangling.csv")).unwrap();
    for path in ["out.csv", "up/secret.csv", "passwd.csv"] {
        let run = run_in(&inside, &format!("load(\"{path}\", unit: \"ppm\")\n"), &[]);
        assert!(run.code == Some(1) && run.out.contains("error[file-outside]"), "{path}\n{}", run.out);
    }
    for path in ["loop.csv", "dangling.csv"] {
        let run = run_in(&inside, &format!("load(\"{path}\", unit: \"ppm\")\n"), &[]);
        assert!(run.code == Some(1) && run.out.contains("error[file-"), "{path}\n{}", run.out);
    }
    assert_eq!(run_in(&inside, "load(\"in.csv\", unit: \"ppm\")\n", &[]).code, Some(0));
    // The script's own folder may be a link.
    symlink(&inside, outside.join("alias")).unwrap();
    let run = finish(program().current_dir(&outside).args(["run", "alias/s.rhy"]));
    assert_eq!(run.code, Some(0), "{}", run.out);
}

#[cfg(unix)]
#[test]
fn pipes_devices_and_folders_are_no_data_and_nothing_waits_for_them() {
    let folder = folder("devices");
    let made = std::process::Command::new("mkfifo").arg(folder.join("pipe.csv")).status().unwrap();
    assert!(made.success());
    fs::create_dir_all(folder.join("folder.csv")).unwrap();
    let _socket = std::os::unix::net::UnixListener::bind(folder.join("socket.csv")).unwrap();
    for path in ["pipe.csv", "folder.csv", "socket.csv"] {
        let run = run_in(&folder, &format!("load(\"{path}\", unit: \"ppm\")\n"), &[]);
        assert_eq!(run.code, Some(1), "{path}");
        assert!(run.out.contains("error[file-kind]"), "{path}\n{}", run.out);
    }
    for path in ["/dev/zero", "/dev/stdin", "/proc/self/environ"] {
        let run = run_in(&folder, &format!("load(\"{path}\", unit: \"ppm\")\n"), &[]);
        assert!(run.code == Some(1) && run.out.contains("error[file-outside]"), "{path}\n{}", run.out);
    }
}

#[cfg(target_os = "linux")]
#[test]
fn a_script_without_end_is_refused_before_memory_is_gone() {
    // Bounded, because a program that is wrong here would take all memory of the machine.
    let bound = "ulimit -v 3000000; exec \"$0\" run /dev/zero --threads 1";
    let run = finish(Command::new("sh").args(["-c", bound, env!("CARGO_BIN_EXE_rhythmite")]));
    assert_eq!(run.code, Some(2), "{run:?}");
    assert!(run.out.is_empty() && run.err.contains("/dev/zero") && !run.err.contains("memory"), "{run:?}");
}

#[cfg(unix)]
#[test]
fn a_file_that_may_not_be_read_says_so() {
    use std::os::unix::fs::PermissionsExt;
    let folder = folder("locked");
    fs::write(folder.join("a.csv"), ROWS).unwrap();
    fs::set_permissions(folder.join("a.csv"), fs::Permissions::from_mode(0o000)).unwrap();
    let readable = fs::read(folder.join("a.csv")).is_ok();
    let run = run_in(&folder, "load(\"a.csv\", unit: \"ppm\")\n", &[]);
    // The superuser reads everything.
    let expected = if readable { Some(0) } else { Some(1) };
    assert_eq!(run.code, expected, "{}", run.out);
    assert!(readable || run.out.contains("error[file-unreadable]"), "{}", run.out);
}

#[test]
fn a_file_above_the_limit_is_refused_before_it_is_read() {
    let folder = folder("limit");
    // A hole of a terabyte takes no room on the disk.
    let file = fs::File::create(folder.join("huge.csv")).unwrap();
    if file.set_len(1 << 40).is_err() {
        file.set_len(1 << 31).unwrap();
    }
    let text = "load(\"huge.csv\", unit: \"ppm\")\n";
    let run = run_in(&folder, text, &[]);
    assert!(run.code == Some(1) && run.out.contains("error[file-size]"), "{}", run.out);
    assert!(run.out.contains("--file-limit"), "{}", run.out);
    let rows: String = (0..150_000).map(|number| format!("{},{}\n", number + 1, number % 7)).collect();
    fs::write(folder.join("some.csv"), format!("year,value\n{rows}")).unwrap();
    let text = "load(\"some.csv\", unit: \"ppm\")\n";
    assert_eq!(run_in(&folder, text, &["--file-limit", "1"]).code, Some(1));
    assert_eq!(run_in(&folder, text, &["--file-limit", "2"]).code, Some(0));
    assert_eq!(run_in(&folder, text, &["--file-limit", "18446744073709551615"]).code, Some(0));
}

#[test]
fn results_do_not_depend_on_where_the_folder_stands() {
    let text = "x = load(\"a.csv\", unit: \"ppm\")\nx * (1 ± 0.1)\n";
    let printed = ["place-one", "place-two"].map(|name| {
        let folder = folder(name);
        fs::write(folder.join("a.csv"), ROWS).unwrap();
        let run = run_in(&folder, text, &["--format", "json"]);
        assert_eq!(run.code, Some(0), "{}", run.out);
        assert!(!run.out.contains(name), "no path of the machine is in the results");
        run.out
    });
    assert_eq!(printed[0], printed[1]);
}
