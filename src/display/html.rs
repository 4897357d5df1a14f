//! Results as HTML, for pages that have their own looks: plain elements, no rules of style but a few attributes, and
//! no colours, so that every theme keeps its own.

use std::sync::Arc;

use super::markup::Markup;
use super::text::{Layout, layout, left_out_words, tabulated, text};
use crate::value::{Shown, Table};

/// Small print: what is good to know and not what one looks for.
const SMALL: &str = "opacity:0.75;font-size:smaller";

/// Digits of one width, so that numbers stand under each other.
const DIGITS: &str = "font-variant-numeric:tabular-nums;white-space:pre";

/// More notes than this are folded away, for whoever wants to know.
const UNFOLDED: usize = 2;

/// What stands with a result on a page.
#[derive(Clone, Copy, Debug)]
pub struct Page<'a> {
    /// The expression, where it is not clear from what stands around.
    pub expression: Option<&'a str>,
    /// What was decided and done on the way.
    pub notes: &'a [Arc<str>],
    /// The fingerprint, and what it was refreshed by.
    pub footer: &'a str,
}

/// A result as HTML: its table where it is one, its lines where it is not, the notes and the footer.
pub fn html(shown: &Shown, page: &Page<'_>) -> String {
    let mut markup = Markup::default();
    markup.element("div").holding(|markup| {
        if let Some(expression) = page.expression {
            markup.element("div").with("style", "font-weight:600;white-space:pre-wrap").saying(expression);
        }
        match tabulated(shown) {
            Some((content, beneath)) => {
                table(markup, &content);
                let beneath = content.notes.iter().map(String::as_str).chain(beneath.lines());
                beneath.for_each(|line| markup.element("div").with("style", SMALL).saying(line.trim()));
            }
            None => {
                for line in text(shown).lines() {
                    markup.element("div").with("style", "white-space:pre-wrap").saying(line.trim_end());
                }
            }
        }
        if page.notes.len() > UNFOLDED {
            markup.element("details").with("style", SMALL).holding(|markup| {
                markup.element("summary").saying(&format!("{} notes on how this was made", page.notes.len()));
                notes(markup, page.notes);
            });
        } else if !page.notes.is_empty() {
            markup.element("div").with("style", SMALL).holding(|markup| notes(markup, page.notes));
        }
        if !page.footer.is_empty() {
            markup.element("div").with("style", SMALL).saying(page.footer);
        }
    });
    markup.finish()
}

fn notes(markup: &mut Markup, notes: &[Arc<str>]) {
    for note in notes {
        markup.element("div").saying(&format!("– {note}"));
    }
}

/// A few words beside the results, such as a notice.
pub fn words_html(words: &str) -> String {
    let mut markup = Markup::default();
    markup.element("div").with("style", SMALL).holding(|markup| {
        for line in words.lines() {
            markup.element("div").saying(line);
        }
    });
    markup.finish()
}

/// How far a computation is, as a bar and in words; the bar only moves where that is not known.
pub fn progress_html(words: &str, fraction: Option<f64>) -> String {
    let mut markup = Markup::default();
    markup.element("div").with("style", SMALL).holding(|markup| {
        let bar = markup.element("progress").at("max", 1.0);
        let bar = match fraction {
            Some(fraction) => bar.at("value", fraction),
            None => bar,
        };
        bar.saying("");
        markup.element("span").saying(&format!(" {words}"));
    });
    markup.finish()
}

/// A diagnostic, as it was written for a terminal without colours.
pub fn diagnostic_html(text: &str) -> String {
    let mut markup = Markup::default();
    markup.element("div").with("style", "border-left:3px solid #c43d3d;padding-left:8px").holding(|markup| {
        for line in text.lines() {
            // Where a caret points must stay under what it points at.
            let style = "font-family:monospace;white-space:pre;min-height:1.2em";
            markup.element("div").with("style", style).saying(line);
        }
    });
    markup.finish()
}

fn table(markup: &mut Markup, content: &Table) {
    let Layout { columns, rows, cut } = layout(content);
    markup.element("table").holding(|markup| {
        for line in 0..=rows {
            let group = if line == 0 { "thead" } else { "tbody" };
            let cell = if line == 0 { "th" } else { "td" };
            let row = |markup: &mut Markup| {
                markup.element("tr").holding(|markup| {
                    for (number, cells) in columns.iter().enumerate() {
                        // Words begin at the left, numbers end at the right.
                        let side = if number == 0 { "left" } else { "right" };
                        let words = cells.get(line).map_or_else(String::new, |cell| padded(cell));
                        let style = format!("text-align:{side};{DIGITS}");
                        markup.element(cell).with("style", &style).saying(&words);
                    }
                });
            };
            markup.element(group).holding(row);
            if let Some((after, left_out)) = cut
                && line == after
            {
                markup.element("tbody").holding(|markup| {
                    markup.element("tr").holding(|markup| {
                        let cell = markup.element("td").at("colspan", columns.len() as f64);
                        cell.with("style", "text-align:left").saying(&left_out_words(left_out));
                    });
                });
            }
        }
    });
}

/// Trailing spaces, which stand for a point and decimals, as spaces of their widths.
fn padded(cell: &str) -> String {
    let number = cell.trim_end();
    let missing = cell.len() - number.len();
    let spaces =
        (0..missing).map(|place| if place == 0 && !number.contains('.') { '\u{2008}' } else { '\u{2007}' });
    number.chars().chain(spaces).collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::value::{Cell, Column};

    #[test]
    fn a_table_is_cut_where_its_text_is_and_decimals_stand_under_each_other() {
        let rows =
            (0..40).map(|row| vec![Cell::Text(format!("<{row}>").into()), Cell::Number(1.5)]).collect();
        let mut content = Table {
            title: String::new(),
            columns: vec![Column::plain("driver"), Column::in_unit("scale", "W/m2")],
            rows,
            notes: vec!["beneath".to_owned()],
        };
        content.rows[1][1] = Cell::Number(20.0);
        let page = Page { expression: Some("a < b"), notes: &[Arc::from("read \"x\"")], footer: "ab12" };
        let text = html(&Shown::Table(Arc::new(content)), &page);
        let tree = roxmltree::Document::parse(&text).unwrap();
        let named = |name: &str| tree.descendants().filter(|node| node.has_tag_name(name)).count();
        assert_eq!((named("tr"), named("th"), named("td")), (1 + 25 + 1, 2, 25 * 2 + 1));
        let words = |text: &str| tree.descendants().any(|node| node.text() == Some(text));
        assert!(words("… 15 rows more …") && words("beneath") && words("– read \"x\"") && words("a < b"));
        assert!(words("20\u{2008}\u{2007}") && words("1.5") && words("ab12") && words("<39>"));
        assert!(!words("<25>"));
    }
}
