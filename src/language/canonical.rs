use std::fmt::{self, Write};

use super::syntax::{BinaryOperator, Expression, ExpressionKind};

/// The expression as text with one way of spacing: what names the random variables of a bare expression, and
/// what a component is called that has no name.
pub fn canonical(expression: &Expression) -> String {
    let mut text = String::new();
    // Writing to a String cannot fail.
    let _ = write_expression(&mut text, expression);
    text
}

fn write_expression(out: &mut String, expression: &Expression) -> fmt::Result {
    match &expression.kind {
        ExpressionKind::Number { value, unit } => match unit {
            Some(unit) => write!(out, "{value} {}", unit.text),
            None => write!(out, "{value}"),
        },
        ExpressionKind::Date { year, month, day } => write!(out, "{year:04}-{month:02}-{day:02}"),
        ExpressionKind::Text(text) => write!(out, "\"{}\"", text.replace('\\', "\\\\").replace('"', "\\\"")),
        ExpressionKind::Name(name) => out.write_str(name),
        ExpressionKind::List(items) => {
            out.push('[');
            for (number, item) in items.iter().enumerate() {
                out.push_str(if number > 0 { ", " } else { "" });
                write_expression(out, item)?;
            }
            out.push(']');
            Ok(())
        }
        ExpressionKind::Call { name, arguments, piped, .. } => {
            let mut rest = arguments.iter();
            if *piped && let Some(first) = rest.next() {
                write_expression(out, &first.value)?;
                out.push_str(" |> ");
            }
            write!(out, "{name}(")?;
            for (number, argument) in rest.enumerate() {
                out.push_str(if number > 0 { ", " } else { "" });
                if let Some((label, _)) = &argument.label {
                    write!(out, "{label}: ")?;
                }
                write_expression(out, &argument.value)?;
            }
            out.push(')');
            Ok(())
        }
        ExpressionKind::Negate(inner) => {
            out.push('-');
            write_expression(out, inner)
        }
        ExpressionKind::Binary { operator, left, right } => {
            write_expression(out, left)?;
            match operator {
                // `2 m ^ 3` is a power of 2 m, `2 m^3` a volume.
                BinaryOperator::Power
                    if matches!(left.kind, ExpressionKind::Number { unit: Some(_), .. }) =>
                {
                    out.push_str(" ^ ");
                }
                BinaryOperator::To | BinaryOperator::Power => out.push_str(operator.symbol()),
                BinaryOperator::By
                | BinaryOperator::Plus
                | BinaryOperator::Minus
                | BinaryOperator::Times
                | BinaryOperator::Over
                | BinaryOperator::PlusMinus => write!(out, " {} ", operator.symbol())?,
            }
            write_expression(out, right)
        }
        ExpressionKind::Convert { value, unit } => {
            write_expression(out, value)?;
            write!(out, " in {}", unit.text)
        }
        ExpressionKind::For { body, variable, list, .. } => {
            out.push('[');
            write_expression(out, body)?;
            write!(out, " for {variable} in ")?;
            write_expression(out, list)?;
            out.push(']');
            Ok(())
        }
        ExpressionKind::Group(inner) => {
            out.push('(');
            write_expression(out, inner)?;
            out.push(')');
            Ok(())
        }
    }
}
