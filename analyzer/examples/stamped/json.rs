//! A small reader of JSON, enough for lists of parts; no escapes in strings.

use std::iter::Peekable;
use std::str::Chars;

/// A JSON value without booleans and null.
#[derive(Debug, Clone, PartialEq)]
pub enum Json {
    /// Any number.
    Number(f64),
    /// A string.
    Text(String),
    /// An array.
    List(Vec<Json>),
    /// An object, in the order of the text.
    Map(Vec<(String, Json)>),
}

impl Json {
    /// Reads one value that fills the whole text.
    pub fn read(text: &str) -> Result<Self, String> {
        let mut rest = text.chars().peekable();
        let found = value(&mut rest)?;
        blank(&mut rest);
        match rest.next() {
            None => Ok(found),
            Some(c) => Err(format!("{c:?} after the end")),
        }
    }

    /// The member `key` of an object.
    pub fn get(&self, key: &str) -> Result<&Self, String> {
        let Self::Map(members) = self else {
            return Err(format!("no object around {key:?}"));
        };
        let member = members.iter().find(|(name, _)| name == key);
        member
            .map(|(_, value)| value)
            .ok_or_else(|| format!("no member {key:?}"))
    }

    /// The number, if it is one.
    pub fn number(&self) -> Result<f64, String> {
        match self {
            Self::Number(number) => Ok(*number),
            other => Err(format!("{other:?} is no number")),
        }
    }

    /// The string, if it is one.
    pub fn text(&self) -> Result<&str, String> {
        match self {
            Self::Text(text) => Ok(text),
            other => Err(format!("{other:?} is no string")),
        }
    }

    /// The array, if it is one.
    pub fn list(&self) -> Result<&[Self], String> {
        match self {
            Self::List(list) => Ok(list),
            other => Err(format!("{other:?} is no array")),
        }
    }
}

type Rest<'a> = Peekable<Chars<'a>>;

fn blank(rest: &mut Rest) {
    while rest.next_if(|c| c.is_ascii_whitespace()).is_some() {}
}

fn expect(rest: &mut Rest, wanted: char) -> Result<(), String> {
    blank(rest);
    match rest.next() {
        Some(c) if c == wanted => Ok(()),
        other => Err(format!("{other:?} where {wanted:?} is due")),
    }
}

fn value(rest: &mut Rest) -> Result<Json, String> {
    blank(rest);
    match rest.peek() {
        Some('{') => Ok(Json::Map(members(rest, '{', '}', |rest| {
            let key = string(rest)?;
            expect(rest, ':')?;
            Ok((key, value(rest)?))
        })?)),
        Some('[') => Ok(Json::List(members(rest, '[', ']', value)?)),
        Some('"') => Ok(Json::Text(string(rest)?)),
        _ => number(rest),
    }
}

/// Comma-separated members between brackets.
fn members<T>(
    rest: &mut Rest,
    open: char,
    close: char,
    member: impl Fn(&mut Rest) -> Result<T, String>,
) -> Result<Vec<T>, String> {
    expect(rest, open)?;
    blank(rest);
    let mut found = Vec::new();
    if rest.next_if_eq(&close).is_some() {
        return Ok(found);
    }
    loop {
        found.push(member(rest)?);
        blank(rest);
        match rest.next() {
            Some(',') => {}
            Some(c) if c == close => return Ok(found),
            other => return Err(format!("{other:?} in a list")),
        }
    }
}

fn string(rest: &mut Rest) -> Result<String, String> {
    expect(rest, '"')?;
    let mut found = String::new();
    loop {
        match rest.next() {
            Some('"') => return Ok(found),
            None | Some('\\') => return Err("string with an escape or without end".to_owned()),
            Some(c) => found.push(c),
        }
    }
}

fn number(rest: &mut Rest) -> Result<Json, String> {
    let mut text = String::new();
    while let Some(c) = rest.next_if(|c| c.is_ascii_alphanumeric() || "+-.".contains(*c)) {
        text.push(c);
    }
    let number: f64 = text.parse().map_err(|_| format!("{text:?} is no number"))?;
    Ok(Json::Number(number))
}
