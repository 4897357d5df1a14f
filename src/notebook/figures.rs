use crate::display::{Caption, chart, pdf, png, svg};
use crate::session::Output;

/// The format of a figure in a file.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum FigureFormat {
    /// For pages of the web and for drawing programs.
    Svg,
    /// For papers.
    Pdf,
    /// For slides, and programs that show no other pictures.
    Png,
}

/// Pixels of a PNG file to one of a page: 288 to the inch, which print asks for.
const PNG_SCALE: f64 = 3.0;

impl FigureFormat {
    fn ending(self) -> &'static str {
        match self {
            Self::Svg => "svg",
            Self::Pdf => "pdf",
            Self::Png => "png",
        }
    }
}

/// A figure as a file.
#[derive(Clone, Debug)]
pub struct FigureFile {
    /// Its name, safe on every system: `01-warming.svg`.
    pub name: String,
    /// What is in it.
    pub contents: Vec<u8>,
}

/// A file in each of the formats for each of the results that are drawn, in order.
pub fn figure_files<'a>(
    outputs: impl IntoIterator<Item = &'a Output>,
    formats: &[FigureFormat],
) -> Vec<FigureFile> {
    let mut files = Vec::new();
    let mut number = 0;
    for output in outputs {
        let Ok(shown) = &output.result else { continue };
        let fingerprint = output.fingerprint.short();
        let caption = Caption {
            expression: &output.expression,
            fingerprint: &fingerprint,
            refreshed_by: &output.refreshed_by,
        };
        if let Some(figure) = chart(shown, &caption) {
            number += 1;
            for format in formats {
                let ending = format.ending();
                let name = format!("{number:02}-{}.{ending}", safe_name(&output.expression));
                let contents = match format {
                    FigureFormat::Svg => svg(&figure).into_bytes(),
                    FigureFormat::Pdf => pdf(&figure),
                    FigureFormat::Png => png(&figure, PNG_SCALE),
                };
                files.push(FigureFile { name, contents });
            }
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
