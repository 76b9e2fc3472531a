//! YAML in and out: the one place that knows the YAML crate.
//!
//! An error names the file, the line, the key, what was read and what would do.

use std::fmt;
use std::path::{Path, PathBuf};

use serde::de::{DeserializeOwned, DeserializeSeed, Deserializer, IgnoredAny, MapAccess, SeqAccess, Visitor};
use serde::{Serialize, de};

/// Why a file was not what it should be.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[error("{}", self.sentence())]
pub struct YamlError {
    /// The file.
    pub file: PathBuf,
    /// Line in the file, 1 first, where known.
    pub line: Option<usize>,
    /// Key, as in `keep[0].to`; empty for the file as a whole.
    pub key: String,
    /// What was read, what was wanted, what to do.
    pub problem: String,
}

impl YamlError {
    /// An error about what stands at `key` (as in `keep[0].to`) of `text`.
    /// Where that key is absent, the line is that of the nearest thing around it.
    pub fn at(file: &Path, text: &str, key: &str, problem: impl Into<String>) -> Self {
        let (file, line) = (file.to_owned(), line_of(text, key));
        Self { file, line, key: key.to_owned(), problem: problem.into() }
    }

    fn sentence(&self) -> String {
        let mut sentence = self.file.display().to_string();
        if let Some(line) = self.line {
            sentence += &format!(", line {line}");
        }
        if !self.key.is_empty() {
            sentence += &format!(", key `{}`", self.key);
        }
        format!("{sentence}: {}", self.problem)
    }
}

/// The text of `bytes`, the contents of `file`.
///
/// # Errors
/// [`YamlError`] when they are not UTF-8, naming the line of the first that is not.
pub fn decode(file: &Path, bytes: Vec<u8>) -> Result<String, YamlError> {
    String::from_utf8(bytes).map_err(|error| {
        let good = error.utf8_error().valid_up_to();
        let line = 1 + error.as_bytes()[..good].iter().filter(|&&byte| byte == b'\n').count();
        let problem = format!(
            "byte {} is not UTF-8; save the file as UTF-8 text, or write `ohm`, `u` and `degC` for Ω, µ and °C",
            good + 1
        );
        YamlError { file: file.to_owned(), line: Some(line), key: String::new(), problem }
    })
}

/// Reads `text`, the contents of `file`.
///
/// # Errors
/// [`YamlError`] when it is no YAML, or not of the shape of `T`.
pub fn read<T: DeserializeOwned>(file: &Path, text: &str) -> Result<T, YamlError> {
    read_with_examples(file, text, &[])
}

/// As [`read`]; where a key of `examples` is missing, the message shows how to write it.
///
/// # Errors
/// [`YamlError`] when it is no YAML, or not of the shape of `T`.
pub fn read_with_examples<T: DeserializeOwned>(
    file: &Path,
    text: &str,
    examples: &[(&str, &str)],
) -> Result<T, YamlError> {
    let text = text.strip_prefix('\u{feff}').unwrap_or(text);
    if text.lines().all(|line| line.trim().is_empty() || line.trim_start().starts_with('#')) {
        let problem = "the file holds no keys; is it the right file, and whole?".to_owned();
        return Err(YamlError { file: file.to_owned(), line: None, key: String::new(), problem });
    }
    serde_yaml::from_str(text).map_err(|error| explain(file, text, examples, &error))
}

/// Text of `value`.
///
/// # Errors
/// [`YamlError`] when the value has no form in YAML.
pub fn write<T: Serialize>(file: &Path, value: &T) -> Result<String, YamlError> {
    let text = serde_yaml::to_string(value).map_err(|error| {
        let problem = format!("cannot be written as YAML: {error}");
        YamlError { file: file.to_owned(), line: None, key: String::new(), problem }
    })?;
    Ok(text.lines().map(with_point).collect())
}

/// A line with its line break, and a number `1e-9` as `1.0e-9`, `2.5e16` as `2.5e+16`:
/// readers of YAML 1.1 take it for text without point and sign.
fn with_point(line: &str) -> String {
    let number = line.rsplit(' ').next().unwrap_or("");
    let before = &line[..line.len() - number.len()];
    let plain = |text: &str| !text.is_empty() && text.bytes().all(|byte| b"-.0123456789".contains(&byte));
    match number.split_once('e') {
        Some((mantissa, exponent))
            if (before.ends_with(": ") || before.ends_with("- ")) && plain(mantissa) && plain(exponent) =>
        {
            let point = if mantissa.contains('.') { "" } else { ".0" };
            let sign = if exponent.starts_with('-') { "" } else { "+" };
            format!("{before}{mantissa}{point}e{sign}{exponent}\n")
        }
        _ => format!("{line}\n"),
    }
}

/// Reads a value that is written as text by `read`, whose refusals are placed
/// to that text; `wanted` says what it should have been when it is no text at all.
///
/// # Errors
/// That of `read`, or of a value that is a list or holds keys.
pub fn from_text<'de, D: Deserializer<'de>, T, E: fmt::Display>(
    deserializer: D,
    wanted: &str,
    read: impl FnOnce(&str) -> Result<T, E>,
) -> Result<T, D::Error> {
    deserializer.deserialize_str(TextVisitor { wanted, read })
}

struct TextVisitor<'a, F> {
    wanted: &'a str,
    read: F,
}

impl<T, E: fmt::Display, F: FnOnce(&str) -> Result<T, E>> Visitor<'_> for TextVisitor<'_, F> {
    type Value = T;

    fn expecting(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        out.write_str(self.wanted)
    }

    fn visit_str<X: de::Error>(self, text: &str) -> Result<T, X> {
        (self.read)(text).map_err(X::custom)
    }
}

/// Turns the crate's error into ours.
fn explain(file: &Path, text: &str, examples: &[(&str, &str)], error: &serde_yaml::Error) -> YamlError {
    let location = error.location();
    let whole = error.to_string();
    let place = location.as_ref().map(|at| format!(" at line {} column {}", at.line(), at.column()));
    let said = place.as_deref().and_then(|place| whole.strip_suffix(place)).unwrap_or(&whole);
    let (parent, said) = split_key(said);
    let mut key = parent.to_owned();
    let mut line = location.as_ref().map(serde_yaml::Location::line);
    let mut problem =
        match said.split_once(" field `").and_then(|(what, rest)| Some((what, rest.split_once('`')?))) {
            Some(("unknown", (name, rest))) => {
                key = joined(parent, name);
                unknown_key(name, rest)
            }
            Some(("missing", (name, _))) => {
                key = joined(parent, name);
                missing_key(&key, examples)
            }
            Some(("duplicate", (name, _))) => {
                key = joined(parent, name);
                line = line_of_nth(text, &key, 1).or(line);
                "stands there twice; keep one of the two".to_owned()
            }
            _ => wrong_type(said, parent, examples),
        };
    if let Some(pointed) = location.as_ref().and_then(|at| pointed_number(text, at.index())) {
        problem += &format!("; a comma separates keys here, write a decimal point: `{pointed}`");
    }
    YamlError { file: file.to_owned(), line, key, problem }
}

/// The key path that the crate puts before its message, and the message.
fn split_key(said: &str) -> (&str, &str) {
    match said.split_once(": ") {
        Some((key, rest)) if !key.is_empty() && !key.contains([' ', '`']) => (key, rest),
        _ => ("", said),
    }
}

fn joined(parent: &str, name: &str) -> String {
    if parent.is_empty() { name.to_owned() } else { format!("{parent}.{name}") }
}

fn missing_key(key: &str, examples: &[(&str, &str)]) -> String {
    match example_of(key, examples) {
        Some(example) => format!("is missing; add for instance `{example}`"),
        None => "is missing; add it".to_owned(),
    }
}

/// How to write a key, whatever its place in a list.
fn example_of<'a>(key: &str, examples: &[(&str, &'a str)]) -> Option<&'a str> {
    let without_indices: String =
        key.split('[').map(|piece| piece.split_once(']').map_or(piece, |(_, rest)| rest)).collect();
    examples.iter().find(|(known, _)| *known == without_indices).map(|(_, example)| *example)
}

fn unknown_key(name: &str, rest: &str) -> String {
    let known: Vec<&str> = rest.split('`').skip(1).step_by(2).collect();
    let nearest = known
        .iter()
        .map(|key| (strsim::damerau_levenshtein(&name.to_lowercase(), key), *key))
        .min()
        .filter(|(distance, key)| *distance <= 1 + key.len() / 3);
    let list = known.iter().map(|key| format!("`{key}`")).collect::<Vec<_>>().join(", ");
    if name.starts_with(|c: char| c.is_ascii_digit()) {
        return format!("is not a key here; a comma separates keys, write a decimal point before `{name}`");
    }
    match nearest {
        Some((_, key)) => format!("is not a key here; did you mean `{key}`? (keys here: {list})"),
        None => format!("is not a key here; keys here: {list}"),
    }
}

/// What serde calls things in its messages, and what they are called here.
const PLAIN_WORDS: &[(&str, &str)] = &[
    ("unit value", "nothing"),
    ("a sequence", "a list"),
    ("sequence", "a list"),
    ("a string", "text"),
    ("a map", "keys"),
    ("map", "keys"),
    ("u32", "a whole number from 0 on"),
    ("u64", "a whole number from 0 on"),
    ("usize", "a whole number from 0 on"),
    ("f64", "a number"),
];

/// Says "read …; wanted …" of a value of the wrong type.
fn wrong_type(said: &str, key: &str, examples: &[(&str, &str)]) -> String {
    let invalid = said.strip_prefix("invalid type: ").or_else(|| said.strip_prefix("invalid value: "));
    let Some((read, wanted)) = invalid.and_then(|rest| rest.split_once(", expected ")) else {
        return with_hint(said);
    };
    let wanted = if wanted.starts_with("struct ") { "keys" } else { wanted };
    let example = match example_of(key, examples) {
        Some(example) => format!(", such as `{example}`"),
        None => String::new(),
    };
    format!("read {}; wanted {}{example}", plain(read), plain(wanted))
}

/// `string "x"` and `integer `3`` become the value alone in backticks.
fn plain(words: &str) -> String {
    if let Some((_, word)) = PLAIN_WORDS.iter().find(|(serde_says, _)| *serde_says == words) {
        return (*word).to_owned();
    }
    let kinds = ["string ", "integer ", "floating point ", "boolean "];
    match kinds.iter().find_map(|kind| words.strip_prefix(kind)) {
        Some(value) => format!("`{}`", value.trim_matches(['"', '`'])),
        None => words.to_owned(),
    }
}

/// What usually lies behind a complaint of the YAML reader (common practice).
const HINTS: &[(&str, &str)] = &[
    ("mapping values are not allowed", "text that holds a colon and a space wants quotes"),
    ("could not find expected ':'", "a key wants a colon and a space after it, here or above"),
    ("tab character", "indent with spaces, not tabs"),
    ("cannot start any token", "indent with spaces, not tabs; text that begins with a sign wants quotes"),
    ("unexpected end of stream", "a quote is not closed, here or above"),
    (
        "did not find expected",
        "look for a missing bracket, brace, quote or space after a colon, here or above",
    ),
];

fn with_hint(said: &str) -> String {
    match HINTS.iter().find(|(cause, _)| said.contains(cause)) {
        Some((_, hint)) => format!("is no YAML here: {said}; {hint}"),
        None => said.to_owned(),
    }
}

/// In `{ loss: 0,5 dB }` the comma ends the value `0`: the number meant, with its point.
fn pointed_number(text: &str, start: usize) -> Option<String> {
    let rest = &text.get(start..)?;
    let unsigned = rest.strip_prefix('-').unwrap_or(rest);
    let whole = unsigned.find(|c: char| !c.is_ascii_digit())?;
    let decimals = unsigned[whole..].strip_prefix(',')?;
    let end = decimals.find([',', '}', ']', '\n', '#']).unwrap_or(decimals.len());
    let starts_with_digit = decimals.starts_with(|c: char| c.is_ascii_digit());
    let signed = if rest.starts_with('-') { "-" } else { "" };
    (whole > 0 && starts_with_digit)
        .then(|| format!("{signed}{}.{}", &unsigned[..whole], decimals[..end].trim_end()))
}

/// Line of the value at `key`, as in `keep[0].to`; of what is around it when absent.
pub fn line_of(text: &str, key: &str) -> Option<usize> {
    line_of_nth(text, key, 0)
}

/// As [`line_of`], past `skip` earlier values of the same key.
fn line_of_nth(text: &str, key: &str, skip: usize) -> Option<usize> {
    let steps: Vec<Step<'_>> = key.split('.').flat_map(steps_of).collect();
    let seek = Seek { steps: &steps, skip };
    let found = seek.deserialize(serde_yaml::Deserializer::from_str(text));
    found.err()?.location().map(|at| at.line())
}

/// One step from a value into one it holds.
enum Step<'a> {
    Key(&'a str),
    Index(usize),
}

/// `keep[0]` is a key, then an index.
fn steps_of(piece: &str) -> impl Iterator<Item = Step<'_>> {
    let mut parts = piece.split('[');
    let name = parts.next().filter(|name| !name.is_empty()).map(Step::Key);
    name.into_iter().chain(parts.filter_map(|part| part.trim_end_matches(']').parse().ok().map(Step::Index)))
}

/// Walks to a value and fails there on purpose: the crate tells the place of
/// an error, and of nothing else.
struct Seek<'a> {
    steps: &'a [Step<'a>],
    /// How many values of the last key to pass by.
    skip: usize,
}

impl<'de> DeserializeSeed<'de> for Seek<'_> {
    type Value = ();

    fn deserialize<D: Deserializer<'de>>(self, deserializer: D) -> Result<(), D::Error> {
        deserializer.deserialize_any(self)
    }
}

impl<'de> Visitor<'de> for Seek<'_> {
    type Value = ();

    fn expecting(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        out.write_str("the place sought")
    }

    fn visit_map<A: MapAccess<'de>>(self, mut map: A) -> Result<(), A::Error> {
        if let Some((Step::Key(name), steps)) = self.steps.split_first() {
            let mut pass_by = if steps.is_empty() { self.skip } else { 0 };
            while let Some(key) = map.next_key::<String>()? {
                if key == *name && pass_by == 0 {
                    return map.next_value_seed(Seek { steps, skip: self.skip });
                }
                pass_by -= usize::from(key == *name);
                map.next_value::<IgnoredAny>()?;
            }
        }
        Err(de::Error::custom("here"))
    }

    fn visit_seq<A: SeqAccess<'de>>(self, mut items: A) -> Result<(), A::Error> {
        if let Some((Step::Index(index), steps)) = self.steps.split_first() {
            for _ in 0..*index {
                if items.next_element::<IgnoredAny>()?.is_none() {
                    break;
                }
            }
            if items.next_element_seed(Seek { steps, skip: self.skip })?.is_some() {
                return Ok(());
            }
        }
        Err(de::Error::custom("here"))
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::parts::quantity::Hertz;
    use serde::Deserialize;

    #[test]
    fn numbers_are_numbers_for_readers_of_the_older_yaml_too() {
        let text = write(Path::new("x"), &(1e-9, 2.5e16, -3e-7, 0.25, "to 1e5", "1e5")).unwrap();
        assert_eq!(text, "- 1.0e-9\n- 2.5e+16\n- -3.0e-7\n- 0.25\n- to 1e5\n- '1e5'\n");
        let read: (f64, f64, f64, f64, String, String) = serde_yaml::from_str(&text).unwrap();
        assert_eq!(read, (1e-9, 2.5e16, -3e-7, 0.25, "to 1e5".into(), "1e5".into()));
    }

    #[derive(Debug, Deserialize)]
    #[serde(deny_unknown_fields)]
    #[allow(dead_code)]
    struct Outer {
        name: String,
        bands: Vec<Band>,
    }

    #[derive(Debug, Deserialize)]
    #[serde(deny_unknown_fields)]
    #[allow(dead_code)]
    struct Band {
        from: Hertz,
        upto: Hertz,
    }

    fn error(text: &str) -> YamlError {
        read_with_examples::<Outer>(
            Path::new("a.yaml"),
            text,
            &[("bands.upto", "upto: 12 Hz"), ("bands", "- { from: 1 Hz }")],
        )
        .expect_err("not of this shape")
    }

    #[test]
    fn a_value_without_unit_is_placed_to_its_line_and_key() {
        let error = error("name: x\nbands:\n  - from: 1 Hz\n    upto: 12\n");
        assert_eq!((error.line, error.key.as_str()), (Some(4), "bands[0].upto"));
        assert_eq!(
            error.to_string(),
            "a.yaml, line 4, key `bands[0].upto`: read `12`, which has no unit; wanted a frequency with its unit, \
             such as `12 Hz`"
        );
    }

    #[test]
    fn a_misspelt_key_names_the_nearest() {
        let error = error("name: x\nbands:\n  - from: 1 Hz\n    uptoo: 12 Hz\n");
        assert_eq!((error.line, error.key.as_str()), (Some(4), "bands[0].uptoo"));
        assert!(error.problem.contains("did you mean `upto`?"), "{error}");
    }

    #[test]
    fn a_missing_key_shows_how_to_write_it() {
        let error = error("name: x\nbands:\n  - { from: 1 Hz }\n");
        assert_eq!((error.line, error.key.as_str()), (Some(3), "bands[0].upto"));
        assert!(error.problem.contains("`upto: 12 Hz`"), "{error}");
    }

    #[test]
    fn a_key_twice_is_an_error() {
        let error = error("name: x\nname: y\nbands: []\n");
        assert_eq!((error.line, error.key.as_str()), (Some(2), "name"));
        assert!(error.problem.contains("twice"), "{error}");
    }

    #[test]
    fn a_decimal_comma_within_braces_gets_its_hint() {
        let error = error("name: x\nbands:\n  - { from: 0,5 Hz, upto: 12 Hz }\n");
        assert_eq!(error.line, Some(3));
        assert!(error.problem.contains("write a decimal point: `0.5 Hz`"), "{error}");
    }

    #[test]
    fn a_value_of_the_wrong_shape_is_told() {
        assert_eq!(
            error("name: x\nbands: 3\n").problem,
            "read `3`; wanted a list, such as `- { from: 1 Hz }`"
        );
        assert_eq!(error("name: [a]\nbands: []\n").problem, "read a list; wanted text");
        assert_eq!(
            error("name: x\nbands: [no]\n").problem,
            "read `no`; wanted keys, such as `- { from: 1 Hz }`"
        );
        assert_eq!(error("- 1\n").problem, "read a list; wanted keys");
    }

    #[test]
    fn broken_yaml_keeps_its_line_and_gets_a_hint() {
        let cases = [
            ("name: x\nbands: []]\n", 2, "missing bracket"),
            ("bands: []\nname: 'x\n", 3, "quote is not closed"),
            ("name: x\n\tbands: []\n", 2, "not tabs"),
            ("name: x: y\nbands: []\n", 1, "wants quotes"),
        ];
        for (text, line, hint) in cases {
            let error = error(text);
            assert!(error.line == Some(line) && error.problem.contains(hint), "{error}");
        }
    }

    #[test]
    fn a_comma_within_a_plain_number_gets_its_hint() {
        let error = error("{ name: 6,50 }\n");
        assert!(error.problem.contains("write a decimal point before `50`"), "{error}");
    }

    #[test]
    fn bytes_that_are_not_utf8_are_placed() {
        let error = decode(Path::new("a.yaml"), b"name: x\nload: 4.7 \xb5F\n".to_vec()).expect_err("Latin-1");
        assert_eq!(error.line, Some(2));
        assert!(error.to_string().contains("byte 19 is not UTF-8"), "{error}");
        assert_eq!(decode(Path::new("a.yaml"), "4.7 µF".into()).unwrap(), "4.7 µF");
    }

    #[test]
    fn an_empty_file_is_said_to_be() {
        for text in ["", "\n# only words\n"] {
            assert!(error(text).to_string().contains("holds no keys"), "{text:?}");
        }
    }

    #[test]
    fn lines_are_found_by_key() {
        let text = "name: x\nbands:\n  - from: 1 Hz\n    upto: 2 Hz\n  - { from: 3 Hz,\n      upto: 4 Hz }\n";
        let cases =
            [("name", 1), ("bands", 3), ("bands[0].upto", 4), ("bands[1].upto", 6), ("bands[1].gone", 5)];
        for (key, line) in cases {
            assert_eq!(line_of(text, key), Some(line), "{key}");
        }
    }
}
