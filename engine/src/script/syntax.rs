//! How a script is read: signs that mean something else here, and refusals with advice.
//!
//! The token hook is marked volatile by the interpreter's authors, so it is used here only.

use rhai::{Engine, LexError, Position, Token};

use super::compare::ORDERINGS;
use super::numbers::{DIVIDE, PLUS_MINUS};

/// As tight as the signs they stand for.
const DIVIDE_PRECEDENCE: u8 = 180;
const ORDERING_PRECEDENCE: u8 = 130;
/// Tighter than `*` and looser than a sign: `2 * 1.5 ± 0.1` is two times the uncertain number.
const PLUS_MINUS_PRECEDENCE: u8 = 185;

/// What is said about `^`.
const NO_POWER: &str = "`^` is not a power here: write `pow(10, -6.35)` or `1e-6`";
const NO_DOUBLE_STAR: &str = "`**` is not a power here: write `pow(10, -6.35)` or `1e-6`";
const NO_DIVIDE_ASSIGN: &str = "`/=` would change a whole number into a decimal: write `x = x / 2`";
const TOO_LARGE: &str = "this number is too large: the largest is about 1.8e308";

/// Installs the reading rules.
pub(super) fn install(engine: &mut Engine) {
    let orderings = ORDERINGS.map(|(operator, _)| (operator, ORDERING_PRECEDENCE));
    let others = [(DIVIDE, DIVIDE_PRECEDENCE), (PLUS_MINUS, PLUS_MINUS_PRECEDENCE)];
    for (operator, precedence) in orderings.into_iter().chain(others) {
        // The names are no identifiers, so nothing in a script can clash with them and this cannot fail.
        let registered = engine.register_custom_operator(operator, precedence);
        debug_assert!(registered.is_ok(), "{registered:?}");
    }
    #[allow(deprecated, reason = "marked volatile, not deprecated; the version is pinned")]
    engine.on_parse_token(|token, _: Position, _| read(token));
}

fn read(token: Token) -> Token {
    match token {
        Token::Divide => operator(DIVIDE),
        Token::LexError(error) if is_plus_minus(&error) => operator(PLUS_MINUS),
        Token::LessThan | Token::LessThanEqualsTo | Token::GreaterThan | Token::GreaterThanEqualsTo => {
            ordering(&token)
        }
        Token::DivideAssign => refused(NO_DIVIDE_ASSIGN),
        Token::XOr | Token::XOrAssign => refused(NO_POWER),
        Token::PowerOf | Token::PowerOfAssign => refused(NO_DOUBLE_STAR),
        Token::FloatConstant(ref x) if x.0.is_infinite() => refused(TOO_LARGE),
        other => other,
    }
}

fn operator(name: &str) -> Token {
    Token::Custom(Box::new(name.into()))
}

fn ordering(token: &Token) -> Token {
    let sign = token.literal_syntax();
    ORDERINGS
        .iter()
        .find(|(_, plain)| *plain == sign)
        .map_or_else(|| token.clone(), |(name, _)| operator(name))
}

fn is_plus_minus(error: &LexError) -> bool {
    matches!(error, LexError::UnexpectedInput(text) if text == PLUS_MINUS)
}

fn refused(advice: &str) -> Token {
    Token::LexError(Box::new(LexError::Runtime(advice.to_owned())))
}
