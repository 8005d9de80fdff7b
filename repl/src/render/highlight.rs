//! Script text as HTML, its words marked by kind.

use lysocline_engine::present::plot_svg::escaped;

const KEYWORDS: [&str; 22] = [
    "as", "break", "catch", "const", "continue", "do", "else", "export", "false", "fn", "for", "if",
    "import", "in", "let", "loop", "return", "switch", "throw", "true", "try", "while",
];

/// The text with `<span>`s: `c` comment, `s` text, `n` number, `k` keyword, `f` what is called.
pub fn html(text: &str) -> String {
    let chars: Vec<char> = text.chars().collect();
    let mut out = String::new();
    let mut at = 0;
    while at < chars.len() {
        let (kind, length) = token(&chars[at..], at.checked_sub(1).map(|before| chars[before]));
        let piece = escaped(&chars[at..at + length].iter().collect::<String>());
        match kind {
            Some(kind) => out.push_str(&format!("<span class=\"{kind}\">{piece}</span>")),
            None => out.push_str(&piece),
        }
        at += length;
    }
    out
}

/// The kind and length of what stands at the beginning.
fn token(rest: &[char], before: Option<char>) -> (Option<char>, usize) {
    let is_word = |c: char| c.is_alphanumeric() || c == '_';
    let while_ = |holds: &dyn Fn(char) -> bool| rest.iter().take_while(|c| holds(**c)).count();
    match rest {
        ['/', '/', ..] => (Some('c'), while_(&|c| c != '\n')),
        ['/', '*', ..] => (Some('c'), block_comment(rest)),
        [quote @ ('"' | '`'), ..] => (Some('s'), quoted(rest, *quote)),
        [c, ..] if c.is_ascii_digit() && !before.is_some_and(is_word) => (Some('n'), number(rest)),
        [c, ..] if is_word(*c) => {
            let length = while_(&is_word);
            let word: String = rest[..length].iter().collect();
            let called = rest.get(length) == Some(&'(');
            let kind = if KEYWORDS.contains(&word.as_str()) { Some('k') } else { called.then_some('f') };
            (kind, length)
        }
        _ => (None, 1),
    }
}

fn number(rest: &[char]) -> usize {
    let mut length = 0;
    while let Some(c) = rest.get(length) {
        let sign = (*c == '-' || *c == '+') && matches!(rest.get(length.wrapping_sub(1)), Some('e' | 'E'));
        let point = *c == '.' && rest.get(length + 1).is_some_and(char::is_ascii_digit);
        if !(c.is_ascii_alphanumeric() || *c == '_' || sign || point) {
            break;
        }
        length += 1;
    }
    length.max(1)
}

fn quoted(rest: &[char], quote: char) -> usize {
    let mut escaped = false;
    for (i, c) in rest.iter().enumerate().skip(1) {
        match c {
            _ if escaped => escaped = false,
            '\\' if quote == '"' => escaped = true,
            c if *c == quote => return i + 1,
            _ => {}
        }
    }
    rest.len()
}

fn block_comment(rest: &[char]) -> usize {
    let mut depth = 0;
    let mut i = 0;
    while i + 1 < rest.len() {
        match (rest[i], rest[i + 1]) {
            ('/', '*') => (depth, i) = (depth + 1, i + 2),
            ('*', '/') => (depth, i) = (depth - 1, i + 2),
            _ => i += 1,
        }
        if depth == 0 {
            return i;
        }
    }
    rest.len()
}

#[cfg(test)]
mod tests {
    use super::html;

    #[track_caller]
    fn case(text: &str, expected: &str) {
        assert_eq!(html(text), expected);
    }

    #[test]
    fn words_by_kind() {
        case(
            "let x = 1e-3; // a<b",
            "<span class=\"k\">let</span> x = <span class=\"n\">1e-3</span>; <span class=\"c\">// a&lt;b</span>",
        );
        case(
            "k2.log_k_at(\"10 \\\" C\")",
            "k2.<span class=\"f\">log_k_at</span>(<span class=\"s\">&quot;10 \\&quot; C&quot;</span>)",
        );
        case("/* a /* b */ c */ 2", "<span class=\"c\">/* a /* b */ c */</span> <span class=\"n\">2</span>");
        case("0..10", "<span class=\"n\">0</span>..<span class=\"n\">10</span>");
        case("\"open", "<span class=\"s\">&quot;open</span>");
    }
}
