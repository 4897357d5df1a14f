use super::{DelimitedOptions, DelimitedTable, read_table};

fn table(bytes: &[u8]) -> DelimitedTable<'_> {
    match read_table(bytes, &DelimitedOptions::default()) {
        Ok(table) => table,
        Err(fault) => panic!("{fault}"),
    }
}

fn fault(bytes: &[u8]) -> String {
    match read_table(bytes, &DelimitedOptions::default()) {
        Ok(table) => panic!("read as {table:?}"),
        Err(fault) => fault.to_string(),
    }
}

fn cells<'a>(table: &'a DelimitedTable<'_>) -> Vec<Vec<&'a str>> {
    (0..table.row_count())
        .map(|row| (0..table.columns.len()).map(|column| table.cell(row, column)).collect())
        .collect()
}

fn names<'a>(table: &'a DelimitedTable<'_>) -> Vec<&'a str> {
    table.columns.iter().map(|column| column.name.as_str()).collect()
}

#[test]
fn comments_and_blank_lines_are_skipped_and_lines_still_counted() {
    let read = table(
        b"# source: invented\n\n  # indented\nyear,value\n# between\n1850,1\n\n#1851,7\n1852,3\n# end\n",
    );
    assert_eq!(read.comments, ["source: invented", "indented", "between", "1851,7", "end"]);
    assert_eq!(cells(&read), [["1850", "1"], ["1852", "3"]]);
    assert_eq!((read.line_of_row(0), read.line_of_row(1)), (6, 9));
    assert_eq!(read.notes, ["1 comment line among the data rows skipped (first in line 8)"]);
}

#[test]
fn a_comment_that_a_spreadsheet_has_quoted_is_a_comment() {
    let read = table(b"\"# units: ppm, dry\",\nyear,value\n1850,1\n");
    assert_eq!(names(&read), ["year", "value"]);
    assert!(read.comments[0].starts_with("units: ppm, dry"), "{:?}", read.comments);
}

#[test]
fn the_byte_order_mark_and_every_newline_are_understood() {
    for newline in ["\n", "\r\n", "\r"] {
        let text = ["\u{feff}# one", "year,value", "", "1850,1", "1851,2", ""].join(newline);
        let read = table(text.as_bytes());
        assert_eq!(names(&read), ["year", "value"], "{newline:?}");
        assert_eq!(cells(&read), [["1850", "1"], ["1851", "2"]], "{newline:?}");
        assert_eq!((read.line_of_row(0), read.line_of_row(1)), (4, 5), "{newline:?}");
    }
    assert_eq!(cells(&table(b"year,value\n1850,1")), [["1850", "1"]]);
}

#[test]
fn quoted_fields_hold_delimiters_quotes_and_newlines() {
    let read = table(b"year,\"name, long\"\n1850,\"a \"\"b\"\"\nc\"\n1851,d\n");
    assert_eq!(names(&read), ["year", "name, long"]);
    assert_eq!(cells(&read), [["1850", "a \"b\"\nc"], ["1851", "d"]]);
    assert_eq!((read.line_of_row(0), read.line_of_row(1)), (2, 4));
}

#[test]
fn the_delimiter_is_found_and_noted_when_it_is_no_comma() {
    let tabs = table(b"year\tvalue\n1850\t1\n");
    assert_eq!(tabs.notes, ["columns are separated by tabs"]);
    let semicolons = table(b"year;temperature (degC, anomaly)\n1850;1\n");
    assert_eq!(semicolons.notes, ["columns are separated by semicolons"]);
    assert_eq!(semicolons.columns[1].unit_text.as_deref(), Some("degC, anomaly"));
    let commas = table(b"year,co2; dry (ppm)\n1850,1\n");
    assert_eq!((names(&commas), commas.notes.len()), (vec!["year", "co2; dry"], 0));
    let told = read_table(
        b"1850,5;0,3\n1851,5;0,4\n",
        &DelimitedOptions { decimal_comma: true, ..DelimitedOptions::default() },
    );
    assert!(told.is_ok_and(|told| cells(&told)[0] == ["1850,5", "0,3"]));
}

#[test]
fn bytes_that_are_no_utf8_are_named_by_line_and_byte() {
    assert_eq!(
        fault(b"# caf\xC3\xA9\nyear,temp (\xB0C)\n1850,1\n"),
        "line 2: byte 12 of the line (0xB0) is not UTF-8; in Latin-1 the byte is `\u{b0}` (save the file \
         as UTF-8)"
    );
    assert!(fault(b"\xFF\xFEy\0e\0").contains("UTF-16"));
    assert!(fault(b"PK\x03\x04\x14").contains("spreadsheet"));
}

#[test]
fn a_file_without_rows_says_what_it_lacks() {
    assert!(fault(b"").starts_with("the file is empty"));
    assert!(fault(b"\xEF\xBB\xBF\r\n \n").starts_with("the file is empty"));
    assert!(fault(b"# only\n# comments").starts_with("the file holds comments and no data"));
    assert_eq!(
        fault(b"# c\nyear,value\n"),
        "line 2: the file has column names (`year`, `value`) and no rows below them"
    );
}

#[test]
fn a_row_of_another_length_is_named_by_its_line() {
    assert!(
        fault(b"year,value\n1850,1\n\n# c\n1851\n")
            .starts_with("line 5: the row has 1 field, the header has 2")
    );
    let decimal = fault(b"year,value\n1850,0,3\n");
    assert!(decimal.starts_with("line 2: the row has 3 fields, the header has 2"), "{decimal}");
    assert!(decimal.contains("decimals: comma"), "{decimal}");
    let apart = fault(b"year,value,n\n1850,\"1\n1851\"\n1852,2,3\n");
    assert!(apart.starts_with("line 2") && apart.contains("quotation mark"), "{apart}");
}

#[test]
fn a_quote_that_is_never_closed_does_not_swallow_the_rest_of_the_file() {
    let open = fault(b"year,value\n1849,0\n1850,\"1\n1851,2\n1852,3\n");
    assert_eq!(open, "line 3: a quotation mark opened in this row is never closed");
    // An inch sign within a cell is no opening quote.
    assert_eq!(table(b"year,value\n1850,5\" core\n").row_count(), 1);
}

#[test]
fn a_file_without_header_has_numbered_columns() {
    let read = table(b"1850,0.5,NA\n1851,0.6,1\n");
    assert_eq!(names(&read), ["column 1", "column 2", "column 3"]);
    assert!(!read.has_header && read.row_count() == 2);
    assert!(read.notes[0].starts_with("the first row (line 1) is all numbers"), "{:?}", read.notes);
    assert!(!table(b"1850-01,0.5\n1850-02,1\n").has_header);
    for headed in [&b"year,1850\n1,2\n"[..], b"NA,nan\n1,2\n", b"inf,nan\n1,2\n"] {
        assert!(table(headed).has_header);
    }
}

#[test]
fn only_brackets_at_the_end_of_a_name_are_a_unit() {
    let read = table(b"a (ppm),b [W/m2],temp_degC,c (x) d,(only),flux (kg (m2 s)-1)\n1,2,3,4,5,6\n");
    let units: Vec<_> = read.columns.iter().map(|column| column.unit_text.as_deref()).collect();
    assert_eq!(units, [Some("ppm"), Some("W/m2"), None, None, None, Some("kg (m2 s)-1")]);
    assert_eq!(names(&read), ["a", "b", "temp_degC", "c (x) d", "(only)", "flux"]);
}

#[test]
fn a_missing_column_lists_the_columns_and_the_nearest_name() {
    let read = table(b"year,temperature (degC)\n1850,1\n");
    let fault = read.column_named("temprature").err().map(|fault| fault.to_string());
    assert_eq!(
        fault.as_deref(),
        Some(
            "there is no column `temprature`; the columns are `year`, `temperature (degC)` (did you mean \
             `temperature`?)"
        )
    );
    assert!(read.column_named("zzzz").is_err_and(|fault| fault.help.is_none()));
    assert_eq!(read.column_named("temperature"), Ok(1));
    assert_eq!(read.column_named("temperature (degC)"), Ok(1));
    assert!(table(b"a,a\n1,2\n").column_named("a").is_err_and(|fault| fault.code == "file-column-twice"));
}

#[test]
fn the_empty_ends_of_a_spreadsheet_are_no_columns_and_no_rows() {
    let read = table(b"year,value,,\n1850,1,,\n,,,\n , ,,\n1851,,,\n");
    assert_eq!(names(&read), ["year", "value"]);
    assert_eq!(cells(&read), [["1850", "1"], ["1851", ""]]);
    assert_eq!(read.notes, ["2 rows without any value skipped"]);
    assert_eq!(names(&table(b"year,,value\n1850,9,1\n")), ["year", "column 2", "value"]);
}
