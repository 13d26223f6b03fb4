//! Points to bytes, bytes to answers.

use super::spec::ProgramFormat;

/// Digits of a line that a message shows.
const SHOWN: usize = 120;

/// The shortest decimal that reads back to the same double; `nan`, `inf`, `-inf`.
pub(crate) fn decimal(x: f64) -> String {
    let mut text = Vec::new();
    put_decimal(&mut text, x);
    String::from_utf8_lossy(&text).into_owned()
}

fn put_decimal(out: &mut Vec<u8>, x: f64) {
    if x.is_nan() {
        out.extend_from_slice(b"nan");
        return;
    }
    out.extend_from_slice(ryu::Buffer::new().format(x).as_bytes());
    if out.ends_with(b".0") {
        out.truncate(out.len() - 2);
    }
}

/// Points, `width` values each, as lines.
pub(crate) fn text_lines(out: &mut Vec<u8>, values: &[f64], width: usize) {
    for point in values.chunks_exact(width) {
        for (j, &value) in point.iter().enumerate() {
            if j > 0 {
                out.push(b' ');
            }
            put_decimal(out, value);
        }
        out.push(b'\n');
    }
}

/// A whole batch of the `f64` format.
pub(crate) fn f64_batch(values: &[f64], width: usize) -> Vec<u8> {
    let n = values.len() / width.max(1);
    let mut bytes = Vec::with_capacity(8 + 8 * values.len());
    bytes.extend((n as u64).to_le_bytes());
    values.iter().for_each(|value| bytes.extend(value.to_le_bytes()));
    bytes
}

/// What an answer should have been.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(crate) struct Unreadable {
    /// The line, cut where it is long.
    pub(crate) line: String,
    /// What is wrong with it.
    pub(crate) reason: String,
}

/// Cuts a stream of bytes into answers of `width` numbers.
#[derive(Debug)]
pub(crate) struct Answers {
    format: ProgramFormat,
    width: usize,
    rest: Vec<u8>,
}

impl Answers {
    pub(crate) fn new(format: ProgramFormat, width: usize) -> Self {
        Self { format, width, rest: Vec::new() }
    }

    /// Adds `bytes`; whole answers go to `out`. An answer that is cut off stays for the bytes to come.
    pub(crate) fn take(&mut self, bytes: &[u8], out: &mut Vec<f64>) -> Result<(), Unreadable> {
        self.rest.extend_from_slice(bytes);
        let used = match self.format {
            ProgramFormat::Text => self.lines(out)?,
            ProgramFormat::F64 => self.doubles(out),
        };
        self.rest.drain(..used);
        Ok(())
    }

    fn lines(&self, out: &mut Vec<f64>) -> Result<usize, Unreadable> {
        let mut used = 0;
        while let Some(length) = self.rest[used..].iter().position(|&byte| byte == b'\n') {
            let line = &self.rest[used..used + length];
            let before = out.len();
            if let Err(reason) = read_line(line, self.width, out) {
                out.truncate(before);
                return Err(Unreadable { line: shown(line), reason });
            }
            used += length + 1;
        }
        Ok(used)
    }

    fn doubles(&self, out: &mut Vec<f64>) -> usize {
        let each = 8 * self.width;
        let whole = self.rest.len() / each * each;
        let numbers = self.rest[..whole].as_chunks::<8>().0;
        out.extend(numbers.iter().map(|bytes| f64::from_le_bytes(*bytes)));
        whole
    }
}

fn read_line(line: &[u8], width: usize, out: &mut Vec<f64>) -> Result<(), String> {
    let Ok(text) = std::str::from_utf8(line) else { return Err("it is not UTF-8 text".into()) };
    let mut found = 0;
    for word in text.split_ascii_whitespace() {
        let Ok(number) = word.parse::<f64>() else {
            return Err(format!("\"{}\" is no number", shown(word.as_bytes())));
        };
        out.push(number);
        found += 1;
    }
    match found {
        0 => Err("it is empty".into()),
        n if n == width => Ok(()),
        n => Err(format!(
            "it has {n} number{}, and {width} {} expected",
            if n == 1 { "" } else { "s" },
            if width == 1 { "is" } else { "are" }
        )),
    }
}

/// A line for a message.
fn shown(line: &[u8]) -> String {
    let text = String::from_utf8_lossy(line);
    let text = text.trim_end();
    let cut: String = text.chars().take(SHOWN).collect();
    if cut.len() < text.len() { format!("{cut}...") } else { cut }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn numbers_are_short_and_read_back() {
        for (x, want) in [(0.1, "0.1"), (-3.0, "-3"), (1e300, "1e300"), (5e-324, "5e-324"), (f64::NAN, "nan")] {
            assert_eq!(decimal(x), want);
        }
        let mut lines = Vec::new();
        text_lines(&mut lines, &[0.1, f64::INFINITY, 1.0 / 3.0, -0.0], 2);
        assert_eq!(lines, b"0.1 inf\n0.3333333333333333 -0\n");
    }

    #[test]
    fn answers_come_whole_however_they_are_cut() {
        let text = b"1 2.5\n nan\t-inf \r\n1e-3 7\nhalf";
        for cut in 1..text.len() {
            let mut answers = Answers::new(ProgramFormat::Text, 2);
            let mut found = Vec::new();
            text.chunks(cut).for_each(|piece| answers.take(piece, &mut found).unwrap());
            assert_eq!(found.len(), 6, "cut at {cut}");
            assert!(found[2].is_nan() && found[3] == f64::NEG_INFINITY && found[5] == 7.0);
        }
        let bytes: Vec<u8> = [1.0_f64, 2.0, 3.0].iter().flat_map(|x| x.to_le_bytes()).collect();
        let mut answers = Answers::new(ProgramFormat::F64, 2);
        let mut found = Vec::new();
        bytes.chunks(5).for_each(|piece| answers.take(piece, &mut found).unwrap());
        assert_eq!(found, [1.0, 2.0]);
    }

    #[test]
    fn wrong_lines_are_told() {
        for (line, want) in [
            ("Tank 1.0\n", "\"Tank\" is no number"),
            ("1 2 3\n", "it has 3 numbers, and 2 are expected"),
            ("1\n", "it has 1 number, and 2 are expected"),
            ("\n", "it is empty"),
        ] {
            let mut found = Vec::new();
            let error =
                Answers::new(ProgramFormat::Text, 2).take(format!("5 6\n{line}").as_bytes(), &mut found).unwrap_err();
            assert_eq!((error.reason.as_str(), found.as_slice()), (want, &[5.0, 6.0][..]));
            assert_eq!(error.line, line.trim_end());
        }
    }
}
