use crate::display::{Caption, chart, svg};
use crate::session::Output;

/// A figure as a file.
#[derive(Clone, Debug)]
pub struct FigureFile {
    /// Its name, safe on every system: `01-warming.svg`.
    pub name: String,
    /// What is in it.
    pub svg: String,
}

/// A file for each of the results that are drawn, in order.
pub fn figure_files<'a>(outputs: impl IntoIterator<Item = &'a Output>) -> Vec<FigureFile> {
    let mut files = Vec::new();
    for output in outputs {
        let Ok(shown) = &output.result else { continue };
        let fingerprint = output.fingerprint.short();
        let caption = Caption {
            expression: &output.expression,
            fingerprint: &fingerprint,
            refreshed_by: &output.refreshed_by,
        };
        if let Some(figure) = chart(shown, &caption) {
            let name = format!("{:02}-{}.svg", files.len() + 1, safe_name(&output.expression));
            files.push(FigureFile { name, svg: svg(&figure) });
        }
    }
    files
}

/// Letters, digits and hyphens that remind of the expression.
fn safe_name(expression: &str) -> String {
    let mut name = String::new();
    for letter in expression.chars() {
        if letter.is_ascii_alphanumeric() || letter == '_' {
            name.push(letter);
        } else if !name.is_empty() && !name.ends_with('-') {
            name.push('-');
        }
        if name.len() >= 40 {
            break;
        }
    }
    let name = name.trim_end_matches('-');
    if name.is_empty() { "figure".to_owned() } else { name.to_owned() }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn file_names_hold_letters_digits_and_hyphens() {
        assert_eq!(safe_name("warming"), "warming");
        assert_eq!(safe_name("a |> b(\"../../etc\")"), "a-b-etc");
        assert_eq!(safe_name("été(α)"), "t");
        assert_eq!(safe_name("α"), "figure");
        assert!(safe_name(&"long name ".repeat(30)).len() <= 40);
    }
}
