//! The one writer of markup: elements close and text escapes by itself, and one function rounds numbers.

/// Markup that is being written.
#[derive(Default)]
pub(super) struct Markup {
    text: String,
}

impl Markup {
    /// Begin an element; it is closed when the returned value goes.
    pub(super) fn element(&mut self, name: &'static str) -> Element<'_> {
        self.text.push('<');
        self.text += name;
        Element { markup: self, name, filled: false }
    }

    /// Words between elements.
    pub(super) fn words(&mut self, words: &str) {
        escape(words, &mut self.text);
    }

    /// All of it.
    pub(super) fn finish(self) -> String {
        self.text
    }
}

/// An element whose attributes are being written.
pub(super) struct Element<'a> {
    markup: &'a mut Markup,
    name: &'static str,
    filled: bool,
}

impl Element<'_> {
    /// An attribute that is text.
    pub(super) fn with(self, name: &'static str, value: &str) -> Self {
        self.markup.text.push(' ');
        self.markup.text += name;
        self.markup.text += "=\"";
        escape(value, &mut self.markup.text);
        self.markup.text.push('"');
        self
    }

    /// An attribute that is a number.
    pub(super) fn at(self, name: &'static str, value: f64) -> Self {
        self.with(name, &number(value))
    }

    /// What stands in the element.
    pub(super) fn holding(mut self, content: impl FnOnce(&mut Markup)) {
        self.filled = true;
        self.markup.text.push('>');
        content(self.markup);
    }

    /// Words alone stand in the element.
    pub(super) fn saying(self, words: &str) {
        self.holding(|markup| markup.words(words));
    }
}

impl Drop for Element<'_> {
    fn drop(&mut self) {
        if self.filled {
            self.markup.text += "</";
            self.markup.text += self.name;
            self.markup.text.push('>');
        } else {
            self.markup.text += "/>";
        }
    }
}

/// A number of a drawing: two decimals, which is less than anybody sees; what is no number is nothing.
pub(super) fn number(value: f64) -> String {
    let mut text = String::new();
    push_number(&mut text, value);
    text
}

/// The same at the end of a text. Drawings are full of numbers: this is four times as fast as the general way.
pub(super) fn push_number(text: &mut String, value: f64) {
    let hundredths = (value * 100.0).round_ties_even();
    if !hundredths.is_finite() || hundredths.abs() < 1.0 {
        text.push('0');
        return;
    }
    if hundredths.abs() > 1e15 {
        *text += &format!("{value:.0}");
        return;
    }
    let whole = hundredths.abs() as u64;
    if hundredths < 0.0 {
        text.push('-');
    }
    let (mut digits, mut rest) = ([0; 20], whole / 100);
    let mut first = digits.len();
    loop {
        first -= 1;
        digits[first] = b'0' + (rest % 10) as u8;
        rest /= 10;
        if rest == 0 {
            break;
        }
    }
    text.extend(digits[first..].iter().map(|digit| char::from(*digit)));
    let (tenths, last) = ((whole / 10 % 10) as u8, (whole % 10) as u8);
    if tenths > 0 || last > 0 {
        text.push('.');
        text.push(char::from(b'0' + tenths));
        if last > 0 {
            text.push(char::from(b'0' + last));
        }
    }
}

/// Signs of markup become references; a character that XML cannot hold becomes the replacement character.
fn escape(words: &str, out: &mut String) {
    for letter in words.chars() {
        match letter {
            '&' => *out += "&amp;",
            '<' => *out += "&lt;",
            '>' => *out += "&gt;",
            '"' => *out += "&quot;",
            '\'' => *out += "&#39;",
            '\t' | '\n' | '\r' => out.push(' '),
            '\0'..='\u{1f}' | '\u{fffe}' | '\u{ffff}' => out.push('\u{fffd}'),
            _ => out.push(letter),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn elements_close_and_text_escapes_by_itself() {
        let mut markup = Markup::default();
        markup.element("g").with("class", "a\"b").holding(|markup| {
            markup.element("path").at("x", 1.0 / 3.0);
            markup.element("text").saying("a < b & \u{1}");
        });
        assert_eq!(
            markup.finish(),
            "<g class=\"a&quot;b\"><path x=\"0.33\"/><text>a &lt; b &amp; \u{fffd}</text></g>"
        );
    }

    #[test]
    fn numbers_are_short_and_never_infinite() {
        assert_eq!([number(-0.001), number(12.5), number(f64::NAN), number(1e3)], ["0", "12.5", "0", "1000"]);
        assert_eq!([number(-0.07), number(1.1), number(1e300 * 1e300)], ["-0.07", "1.1", "0"]);
    }

    proptest::proptest! {
        #[test]
        fn numbers_are_those_of_the_general_way(value in -1e7..1e7f64, power in 0..8) {
            let value = value / 10f64.powi(power);
            let text = format!("{value:.2}");
            let text = text.trim_end_matches('0').trim_end_matches('.');
            proptest::prop_assert_eq!(number(value), if text == "-0" { "0" } else { text });
        }
    }
}
