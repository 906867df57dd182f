//! The grammar of formulas: text to a syntax tree with the place of every part.
//!
//! ```text
//! sum     = product { ("+" | "-") product }
//! product = signed { ("*" | "/") signed }
//! signed  = { "+" | "-" } power
//! power   = atom [ "^" signed ]          so a^b^c = a^(b^c), -x^2 = -(x^2), 2^-1 = 2^(-1)
//! atom    = number | name | name "(" sum { "," sum } ")" | "(" sum ")"
//! ```
//!
//! The tree is a list in which every part stands after its own parts, so that no later pass recurses;
//! only the parser does, and it counts its depth.

use std::ops::Range;

use crate::decimal::Decimal;

/// Parentheses, signs and powers inside one another that a formula may have. Far above any model
/// written by hand and far below what the stack of a thread holds.
pub(crate) const DEEPEST: usize = 200;

/// Index of a part in [`Syntax::parts`].
pub(crate) type PartId = usize;

#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Operator {
    Add,
    Subtract,
    Multiply,
    Divide,
    Power,
}

#[derive(Clone, Debug, PartialEq)]
pub(crate) enum Part {
    Number(Decimal),
    Name(String),
    Negate(PartId),
    Operation(Operator, PartId, PartId),
    /// The span of the name comes first.
    Call(String, Range<usize>, Vec<PartId>),
}

/// A parsed formula; spans are byte ranges of its text. The last part is the whole.
#[derive(Clone, Debug, Default)]
pub(crate) struct Syntax {
    pub parts: Vec<(Part, Range<usize>)>,
}

/// A formula that does not follow the grammar.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct SyntaxError {
    pub span: Range<usize>,
    pub message: String,
    pub help: Option<String>,
}

#[derive(Clone, Debug, PartialEq)]
enum Token {
    Number(Decimal),
    Name(String),
    Sign(char),
    End,
}

/// Parses a formula.
pub(crate) fn parse(text: &str) -> Result<Syntax, SyntaxError> {
    let tokens = scan(text)?;
    let mut parser = Parser { tokens, at: 0, depth: 0, syntax: Syntax::default() };
    if parser.peek() == &Token::End {
        return Err(error(0..text.len(), "the formula is empty", None));
    }
    parser.sum()?;
    match parser.peek() {
        Token::End => Ok(parser.syntax),
        _ => Err(parser.unexpected_after_operand()),
    }
}

fn error(span: Range<usize>, message: impl Into<String>, help: Option<&str>) -> SyntaxError {
    SyntaxError { span, message: message.into(), help: help.map(str::to_owned) }
}

fn scan(text: &str) -> Result<Vec<(Token, Range<usize>)>, SyntaxError> {
    let bytes = text.as_bytes();
    let mut tokens = Vec::new();
    let mut at = 0;
    while let Some(first) = text[at..].chars().next() {
        let end = match first {
            c if c.is_whitespace() => {
                at += c.len_utf8();
                continue;
            }
            '0'..='9' | '.' => number_end(bytes, at),
            c if c.is_alphabetic() || c == '_' => name_end(text, at),
            c => at + c.len_utf8(),
        };
        let span = at..end;
        let word = &text[span.clone()];
        let token = match first {
            '0'..='9' | '.' => Token::Number(finite_number(word, &span)?),
            '+' | '-' | '/' | '^' | '(' | ')' | ',' => Token::Sign(first),
            '*' if bytes.get(end) == Some(&b'*') => {
                return Err(error(at..end + 1, "`**` is not an operator", Some("write a power as `a^b`")));
            }
            '*' => Token::Sign('*'),
            c if c.is_alphabetic() || c == '_' => Token::Name(word.to_owned()),
            c => {
                return Err(error(span, format!("`{c}` has no meaning in a formula"), other_sign(c)));
            }
        };
        tokens.push((token, span));
        at = end;
    }
    tokens.push((Token::End, text.len()..text.len()));
    Ok(tokens)
}

/// What to write instead of a sign that other notations have.
fn other_sign(sign: char) -> Option<&'static str> {
    match sign {
        '×' | '·' | '⋅' => Some("write a product as `a * b`"),
        '÷' => Some("write a quotient as `a / b`"),
        '−' | '–' => Some("write a minus as `-`"),
        '[' | ']' | '{' | '}' => Some("use parentheses `(` and `)`"),
        '=' | '<' | '>' => Some("a formula is one value, without comparisons"),
        _ => None,
    }
}

/// End of the longest run that looks like a number, so that `1.2.3` is one wrong number.
fn number_end(bytes: &[u8], start: usize) -> usize {
    let mut end = start;
    while let Some(&byte) = bytes.get(end) {
        let exponent_sign = matches!(byte, b'+' | b'-')
            && matches!(bytes[end - 1], b'e' | b'E')
            && bytes.get(end + 1).is_some_and(u8::is_ascii_digit);
        let exponent = matches!(byte, b'e' | b'E')
            && bytes.get(end + 1).is_some_and(|b| b.is_ascii_digit() || matches!(b, b'+' | b'-'));
        if !(byte.is_ascii_digit() || byte == b'.' || exponent || (end > start && exponent_sign)) {
            break;
        }
        end += 1;
    }
    end
}

fn name_end(text: &str, start: usize) -> usize {
    let rest = &text[start..];
    rest.find(|c: char| !(c.is_alphanumeric() || c == '_')).map_or(text.len(), |length| start + length)
}

fn finite_number(word: &str, span: &Range<usize>) -> Result<Decimal, SyntaxError> {
    let Some(number) = Decimal::parse(word) else {
        return Err(error(span.clone(), format!("`{word}` is not a number"), Some("numbers look like 2, 0.5 or 1e-3")));
    };
    if number.to_f64().is_finite() {
        return Ok(number);
    }
    Err(error(span.clone(), format!("the number {word} is not finite in double precision"), None))
}

struct Parser {
    tokens: Vec<(Token, Range<usize>)>,
    at: usize,
    depth: usize,
    syntax: Syntax,
}

impl Parser {
    fn peek(&self) -> &Token {
        &self.tokens[self.at].0
    }

    fn span(&self) -> Range<usize> {
        self.tokens[self.at].1.clone()
    }

    /// Takes the next token if it is this sign.
    fn take(&mut self, sign: char) -> bool {
        let found = self.peek() == &Token::Sign(sign);
        self.at += usize::from(found);
        found
    }

    fn take_any(&mut self, signs: &[char]) -> Option<char> {
        signs.iter().copied().find(|sign| self.take(*sign))
    }

    fn push(&mut self, part: Part, span: Range<usize>) -> PartId {
        self.syntax.parts.push((part, span));
        self.syntax.parts.len() - 1
    }

    fn span_of(&self, id: PartId) -> Range<usize> {
        self.syntax.parts[id].1.clone()
    }

    fn operation(&mut self, operator: Operator, a: PartId, b: PartId) -> PartId {
        let span = self.span_of(a).start..self.span_of(b).end;
        self.push(Part::Operation(operator, a, b), span)
    }

    fn sum(&mut self) -> Result<PartId, SyntaxError> {
        let mut left = self.product()?;
        while let Some(sign) = self.take_any(&['+', '-']) {
            let right = self.product()?;
            let operator = if sign == '+' { Operator::Add } else { Operator::Subtract };
            left = self.operation(operator, left, right);
        }
        Ok(left)
    }

    fn product(&mut self) -> Result<PartId, SyntaxError> {
        let mut left = self.signed()?;
        while let Some(sign) = self.take_any(&['*', '/']) {
            let right = self.signed()?;
            let operator = if sign == '*' { Operator::Multiply } else { Operator::Divide };
            left = self.operation(operator, left, right);
        }
        Ok(left)
    }

    /// Every way into another level of the grammar passes here.
    fn signed(&mut self) -> Result<PartId, SyntaxError> {
        self.depth += 1;
        if self.depth > DEEPEST {
            let message = format!("the formula is nested more than {DEEPEST} levels deep");
            return Err(error(self.span(), message, Some("split it with named `expressions`")));
        }
        let start = self.span().start;
        let part = match self.take_any(&['+', '-']) {
            Some('-') => {
                let inner = self.signed()?;
                let end = self.span_of(inner).end;
                self.push(Part::Negate(inner), start..end)
            }
            Some(_) => self.signed()?,
            None => self.power()?,
        };
        self.depth -= 1;
        Ok(part)
    }

    fn power(&mut self) -> Result<PartId, SyntaxError> {
        let base = self.atom()?;
        if !self.take('^') {
            return Ok(base);
        }
        let exponent = self.signed()?;
        Ok(self.operation(Operator::Power, base, exponent))
    }

    fn atom(&mut self) -> Result<PartId, SyntaxError> {
        let span = self.span();
        match self.peek().clone() {
            Token::Number(number) => {
                self.at += 1;
                Ok(self.push(Part::Number(number), span))
            }
            Token::Name(name) => {
                self.at += 1;
                if self.take('(') { self.call(name, span) } else { Ok(self.push(Part::Name(name), span)) }
            }
            Token::Sign('(') => {
                self.at += 1;
                let inner = self.sum()?;
                let end = self.close(&span)?;
                // The span of a parenthesised part includes its parentheses.
                self.syntax.parts[inner].1 = span.start..end;
                Ok(inner)
            }
            Token::Sign(sign) => {
                Err(error(span, format!("a number, a name or `(` is expected here, not `{sign}`"), None))
            }
            Token::End => Err(error(span, "the formula ends where a number, a name or `(` is expected", None)),
        }
    }

    fn call(&mut self, name: String, name_span: Range<usize>) -> Result<PartId, SyntaxError> {
        let open = self.tokens[self.at - 1].1.clone();
        let mut arguments = Vec::new();
        if self.peek() != &Token::Sign(')') {
            arguments.push(self.sum()?);
            while self.take(',') {
                arguments.push(self.sum()?);
            }
        }
        let end = self.close(&open)?;
        let span = name_span.start..end;
        Ok(self.push(Part::Call(name, name_span, arguments), span))
    }

    /// Takes `)` and returns its end.
    fn close(&mut self, open: &Range<usize>) -> Result<usize, SyntaxError> {
        let span = self.span();
        if self.take(')') {
            return Ok(span.end);
        }
        if self.peek() == &Token::End {
            return Err(error(open.clone(), "this `(` is never closed", None));
        }
        Err(self.unexpected_after_operand())
    }

    fn unexpected_after_operand(&self) -> SyntaxError {
        let span = self.span();
        let found = match self.peek() {
            Token::Sign(')') => return error(span, "this `)` closes nothing", None),
            Token::Sign(',') => {
                return error(
                    span,
                    "a comma stands only between the arguments of a function",
                    Some("write decimal numbers with a point"),
                );
            }
            Token::Sign(sign) => format!("`{sign}`"),
            Token::Name(name) => format!("`{name}`"),
            Token::Number(number) => format!("`{number}`"),
            Token::End => "the end of the formula".to_owned(),
        };
        error(span, format!("an operator is expected before {found}"), Some("write products with `*`, as in `2 * x`"))
    }
}

#[cfg(test)]
mod tests {
    use super::{Operator, Part, PartId, Syntax, parse};

    fn shape(syntax: &Syntax, id: PartId) -> String {
        match &syntax.parts[id].0 {
            Part::Number(number) => number.to_string(),
            Part::Name(name) => name.clone(),
            Part::Negate(a) => format!("(-{})", shape(syntax, *a)),
            Part::Operation(operator, a, b) => {
                let sign = match operator {
                    Operator::Add => '+',
                    Operator::Subtract => '-',
                    Operator::Multiply => '*',
                    Operator::Divide => '/',
                    Operator::Power => '^',
                };
                format!("({}{sign}{})", shape(syntax, *a), shape(syntax, *b))
            }
            Part::Call(name, _, arguments) => {
                let inner: Vec<_> = arguments.iter().map(|a| shape(syntax, *a)).collect();
                format!("{name}({})", inner.join(","))
            }
        }
    }

    #[test]
    fn precedence() {
        for (text, expected) in [
            ("-x^2", "(-(x^2))"),
            ("2^-1", "(2^(-1))"),
            ("a^b^c", "(a^(b^c))"),
            ("a-b-c", "((a-b)-c)"),
            ("a/b*c", "((a/b)*c)"),
            ("a+b*c^2", "(a+(b*(c^2)))"),
            ("-a*b", "((-a)*b)"),
            ("a*-b", "(a*(-b))"),
            ("2^-x^2", "(2^(-(x^2)))"),
            ("+x", "x"),
            ("--x", "(-(-x))"),
            ("atan2(y, x+1)", "atan2(y,(x+1))"),
            ("(a)", "a"),
            ("1e-3*.5", "(0.001*0.5)"),
            ("3e", ""),
        ] {
            match parse(text) {
                Ok(syntax) => assert_eq!(shape(&syntax, syntax.parts.len() - 1), expected, "{text}"),
                Err(_) => assert_eq!(expected, "", "{text}"),
            }
        }
    }

    #[test]
    fn deep_nesting_is_an_error_not_an_overflow() {
        for text in ["(".repeat(100_000), "-".repeat(100_000), "2^".repeat(100_000), "sin(".repeat(100_000)] {
            let error = parse(&text).expect_err("too deep");
            assert!(error.message.contains("nested"), "{}", error.message);
        }
        let long = vec!["x"; 100_000].join("+");
        assert_eq!(parse(&long).expect("long is not deep").parts.len(), 199_999);
    }
}
