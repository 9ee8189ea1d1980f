//! How a log is written: delimiters, headers, encodings.

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum UnitsRow {
    None,
    BeforeHeader,
    AfterHeader,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Encoding {
    Utf8,
    Utf8Bom,
    Utf16Le,
}

/// How the file is written.
#[derive(Debug, Clone, PartialEq)]
pub struct Text {
    pub delimiter: char,
    pub decimal_comma: bool,
    pub header: bool,
    pub units_row: UnitsRow,
    /// Lines above everything else.
    pub banner: Vec<String>,
    /// A comment line (`# ...`) after every so many records; 0: none.
    pub comment_every: usize,
    pub line_end: &'static str,
    pub encoding: Encoding,
    pub trailing_delimiter: bool,
    /// Data lines spoilt beyond reading.
    pub garbled: usize,
    /// The header again, in the quiet record after the firing.
    pub repeated_header: bool,
    pub cut_last_line: bool,
    /// A column of words after the readings.
    pub words: bool,
    /// A column of a slowly rising temperature, which is no force.
    pub temperature: bool,
    /// NUL bytes strewn before some line ends.
    pub nul_bytes: usize,
}

impl Default for Text {
    fn default() -> Self {
        Text {
            delimiter: ',',
            decimal_comma: false,
            header: true,
            units_row: UnitsRow::None,
            banner: Vec::new(),
            comment_every: 0,
            line_end: "\n",
            encoding: Encoding::Utf8,
            trailing_delimiter: false,
            garbled: 0,
            repeated_header: false,
            cut_last_line: false,
            words: false,
            temperature: false,
            nul_bytes: 0,
        }
    }
}

/// Text with its lines counted.
pub struct Lines {
    pub text: String,
    pub end: &'static str,
    pub count: u64,
}

impl Lines {
    pub fn push(&mut self, line: &str) {
        self.text.push_str(line);
        self.text.push_str(self.end);
        self.count += 1;
    }
}

/// Seconds of the day as hours, minutes, seconds and milliseconds.
pub fn clock(seconds: f64) -> String {
    let millis = (seconds * 1000.0).round() as u64;
    let (s, ms) = (millis / 1000, millis % 1000);
    format!("{:02}:{:02}:{:02}.{ms:03}", s / 3600 % 24, s / 60 % 60, s % 60)
}

pub fn encode(text: &str, encoding: Encoding) -> Vec<u8> {
    match encoding {
        Encoding::Utf8 => text.as_bytes().to_vec(),
        Encoding::Utf8Bom => [b"\xef\xbb\xbf", text.as_bytes()].concat(),
        Encoding::Utf16Le => {
            let mut out = vec![0xff, 0xfe];
            for unit in text.encode_utf16() {
                out.extend_from_slice(&unit.to_le_bytes());
            }
            out
        }
    }
}
