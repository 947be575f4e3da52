//! Bytes from the keyboard, understood as keys and pasted text.
//!
//! The reading is our own, for two faults that a ready-made reader showed here: more
//! than a kilobyte arriving at once left keys lying until the next key came, and a
//! dropped line made the reading thread spin without end.

use ratatui::crossterm::event::{KeyCode, KeyEvent, KeyModifiers};

/// What bytes can mean.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(super) enum Typed {
    /// One key.
    Key(KeyEvent),
    /// Pasted text, as it came.
    Paste(String),
}

const ESC: u8 = 0x1b;
const PASTE_END: &[u8] = b"\x1b[201~";
/// The most bytes of one paste that are kept.
const PASTE_LIMIT: usize = 1 << 20;
/// The longest sequence that is still taken for one.
const SEQUENCE_LIMIT: usize = 64;

/// Turns bytes into keys, however they are cut up on their way.
#[derive(Debug, Default)]
pub(super) struct KeyParser {
    /// The beginning of a sequence whose end has not come yet.
    begun: Vec<u8>,
    /// The text of a paste whose end has not come yet.
    pasted: Option<Vec<u8>>,
}

/// What the first bytes of a buffer are.
enum Sense {
    /// Not enough to say.
    Unfinished,
    /// This many bytes are this key.
    Key(usize, KeyEvent),
    /// This many bytes begin a paste.
    PasteStart(usize),
    /// This many bytes mean nothing to us.
    Nothing(usize),
}

impl KeyParser {
    /// Takes bytes and appends what they complete to `typed`.
    pub(super) fn feed(&mut self, bytes: &[u8], typed: &mut Vec<Typed>) {
        for byte in bytes {
            if let Some(pasted) = &mut self.pasted {
                pasted.push(*byte);
                if pasted.ends_with(PASTE_END) {
                    pasted.truncate(pasted.len() - PASTE_END.len());
                    self.end_paste(typed);
                } else if pasted.len() >= PASTE_LIMIT + PASTE_END.len() {
                    pasted.remove(PASTE_LIMIT);
                }
            } else {
                self.begun.push(*byte);
                self.settle(typed);
            }
        }
    }

    /// Takes what has begun for complete, because nothing has followed for a while.
    pub(super) fn give_up(&mut self, typed: &mut Vec<Typed>) {
        match *self.begun {
            [ESC] => typed.push(Typed::Key(KeyCode::Esc.into())),
            // The beginning of a sequence is also what Alt with a character sends.
            [ESC, byte] => typed.push(Typed::Key(with_alt(character(byte.into())))),
            _ => {}
        }
        self.begun.clear();
        self.end_paste(typed);
    }

    /// Whether a sequence has begun that the next bytes may complete.
    pub(super) fn is_in_sequence(&self) -> bool {
        !self.begun.is_empty()
    }

    /// Whether a paste has begun that has not ended.
    pub(super) fn is_in_paste(&self) -> bool {
        self.pasted.is_some()
    }

    fn end_paste(&mut self, typed: &mut Vec<Typed>) {
        if let Some(pasted) = self.pasted.take() {
            typed.push(Typed::Paste(String::from_utf8_lossy(&pasted).into_owned()));
        }
    }

    fn settle(&mut self, typed: &mut Vec<Typed>) {
        while !self.begun.is_empty() {
            let length = match sense(&self.begun) {
                Sense::Unfinished => return,
                Sense::Key(length, key) => {
                    typed.push(Typed::Key(key));
                    length
                }
                Sense::PasteStart(length) => {
                    self.pasted = Some(Vec::new());
                    length
                }
                Sense::Nothing(length) => length,
            };
            self.begun.drain(..length);
        }
    }
}

/// Says what a buffer that is not empty begins with.
fn sense(bytes: &[u8]) -> Sense {
    let control = |letter: u8| {
        let key = KeyEvent::new(KeyCode::Char(letter.into()), KeyModifiers::CONTROL);
        Sense::Key(1, key)
    };
    let plain = |code: KeyCode| Sense::Key(1, code.into());
    match bytes[0] {
        ESC => sense_after_escape(bytes),
        b'\r' | b'\n' => plain(KeyCode::Enter),
        b'\t' => plain(KeyCode::Tab),
        // Terminals disagree on which of the two the key sends.
        0x08 | 0x7f => plain(KeyCode::Backspace),
        0x00 => control(b' '),
        byte @ 0x01..=0x1a => control(byte - 1 + b'a'),
        byte @ 0x1c..=0x1f => control(byte - 0x1c + b'4'),
        byte @ 0x20..=0x7e => Sense::Key(1, character(byte.into())),
        _ => sense_beyond_ascii(bytes),
    }
}

fn sense_beyond_ascii(bytes: &[u8]) -> Sense {
    let length = match bytes[0] {
        0xc2..=0xdf => 2,
        0xe0..=0xef => 3,
        0xf0..=0xf4 => 4,
        _ => return Sense::Nothing(1),
    };
    let start = &bytes[..length.min(bytes.len())];
    match std::str::from_utf8(start) {
        Ok(text) => match text.chars().next() {
            Some(letter) if !letter.is_control() => Sense::Key(length, character(letter)),
            _ => Sense::Nothing(length),
        },
        // No error length means that the bytes only stop too early.
        Err(error) if error.error_len().is_none() => Sense::Unfinished,
        Err(_) => Sense::Nothing(1),
    }
}

fn sense_after_escape(bytes: &[u8]) -> Sense {
    match bytes.get(1) {
        None => Sense::Unfinished,
        Some(&ESC) => Sense::Key(1, KeyCode::Esc.into()),
        Some(b'[') => sense_sequence(bytes),
        Some(b'O') => match bytes.get(2) {
            None => Sense::Unfinished,
            Some(byte) => application_key(*byte).map_or(Sense::Nothing(3), |code| {
                Sense::Key(3, KeyEvent::new(code, KeyModifiers::NONE))
            }),
        },
        Some(_) => match sense(&bytes[1..]) {
            Sense::Key(length, key) => Sense::Key(length + 1, with_alt(key)),
            Sense::Nothing(length) => Sense::Nothing(length + 1),
            unfinished => unfinished,
        },
    }
}

/// The keys that follow `ESC O`.
fn application_key(byte: u8) -> Option<KeyCode> {
    Some(match byte {
        b'A' => KeyCode::Up,
        b'B' => KeyCode::Down,
        b'C' => KeyCode::Right,
        b'D' => KeyCode::Left,
        b'H' => KeyCode::Home,
        b'F' => KeyCode::End,
        b'M' => KeyCode::Enter,
        b'P'..=b'S' => KeyCode::F(byte - b'P' + 1),
        // The number pad: * + , - . / and the digits.
        b'j'..=b'y' => KeyCode::Char(char::from(byte - b'j' + b'*')),
        _ => return None,
    })
}

/// A control sequence: `ESC [`, numbers, a final byte.
fn sense_sequence(bytes: &[u8]) -> Sense {
    // The Linux console puts a second bracket before the letter of F1 to F5.
    if bytes.get(2) == Some(&b'[') {
        return match bytes.get(3) {
            None => Sense::Unfinished,
            Some(byte @ b'A'..=b'E') => Sense::Key(4, KeyCode::F(byte - b'A' + 1).into()),
            Some(_) => Sense::Nothing(4),
        };
    }
    let Some(length) = bytes[2..].iter().position(|byte| !(0x20..0x40).contains(byte)) else {
        return if bytes.len() < SEQUENCE_LIMIT {
            Sense::Unfinished
        } else {
            Sense::Nothing(bytes.len())
        };
    };
    let (parameters, last) = (&bytes[2..length + 2], bytes[length + 2]);
    if !(0x40..0x7f).contains(&last) {
        // The sequence has been cut short; what cut it may be a key.
        return Sense::Nothing(length + 2);
    }
    let mut numbers = parameters.split(|byte| *byte == b';').map(number);
    let first = numbers.next().unwrap_or(0);
    let modifiers = modifiers(numbers.next().unwrap_or(0));
    let code = match (last, first) {
        (b'~', 200) => return Sense::PasteStart(length + 3),
        (b'~', first) => numbered_key(first),
        (b'u', first) => coded_key(first),
        (b'Z', _) => Some(KeyCode::BackTab),
        (b'A'..=b'D' | b'F' | b'H' | b'P'..=b'S', _) => application_key(last),
        _ => None,
    };
    match code {
        Some(code) => Sense::Key(length + 3, KeyEvent::new(code, modifiers)),
        None => Sense::Nothing(length + 3),
    }
}

/// The keys of `ESC [ number ~`.
fn numbered_key(number: u32) -> Option<KeyCode> {
    let function = |first: u32, key: u8| u8::try_from(number - first).map(|n| KeyCode::F(key + n));
    match number {
        1 | 7 => Some(KeyCode::Home),
        2 => Some(KeyCode::Insert),
        3 => Some(KeyCode::Delete),
        4 | 8 => Some(KeyCode::End),
        5 => Some(KeyCode::PageUp),
        6 => Some(KeyCode::PageDown),
        11..=15 => function(11, 1).ok(),
        17..=21 => function(17, 6).ok(),
        23 | 24 => function(23, 11).ok(),
        _ => None,
    }
}

/// The keys of `ESC [ code u`, which some terminals send without being asked.
fn coded_key(code: u32) -> Option<KeyCode> {
    match code {
        9 => Some(KeyCode::Tab),
        13 => Some(KeyCode::Enter),
        27 => Some(KeyCode::Esc),
        127 => Some(KeyCode::Backspace),
        _ => char::from_u32(code).filter(|letter| !letter.is_control()).map(KeyCode::Char),
    }
}

/// The decimal number at the start of some bytes; 0 when there is none.
fn number(bytes: &[u8]) -> u32 {
    bytes.iter().take_while(|byte| byte.is_ascii_digit()).fold(0_u32, |number, byte| {
        number.saturating_mul(10).saturating_add(u32::from(byte - b'0'))
    })
}

/// The modifiers that a sequence's second number stands for.
fn modifiers(number: u32) -> KeyModifiers {
    let bits = number.saturating_sub(1);
    [(1, KeyModifiers::SHIFT), (2, KeyModifiers::ALT), (4, KeyModifiers::CONTROL)]
        .into_iter()
        .filter(|(bit, _)| bits & bit != 0)
        .fold(KeyModifiers::NONE, |all, (_, modifier)| all | modifier)
}

/// A printed character as a key.
fn character(letter: char) -> KeyEvent {
    let modifiers = if letter.is_uppercase() { KeyModifiers::SHIFT } else { KeyModifiers::NONE };
    KeyEvent::new(KeyCode::Char(letter), modifiers)
}

fn with_alt(key: KeyEvent) -> KeyEvent {
    KeyEvent::new(key.code, key.modifiers | KeyModifiers::ALT)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn typed(bytes: &[u8]) -> Vec<Typed> {
        let (mut parser, mut typed) = (KeyParser::default(), Vec::new());
        parser.feed(bytes, &mut typed);
        parser.give_up(&mut typed);
        typed
    }

    fn key(code: KeyCode, modifiers: KeyModifiers) -> Vec<Typed> {
        vec![Typed::Key(KeyEvent::new(code, modifiers))]
    }

    const NONE: KeyModifiers = KeyModifiers::NONE;
    const CONTROL: KeyModifiers = KeyModifiers::CONTROL;
    const ALT: KeyModifiers = KeyModifiers::ALT;
    const SHIFT: KeyModifiers = KeyModifiers::SHIFT;

    #[test]
    fn each_key_is_known_by_what_terminals_send_for_it() {
        for (bytes, code, modifiers) in [
            ("a", KeyCode::Char('a'), NONE),
            ("A", KeyCode::Char('A'), SHIFT),
            ("τ", KeyCode::Char('τ'), NONE),
            ("犬", KeyCode::Char('犬'), NONE),
            ("𝛼", KeyCode::Char('𝛼'), NONE),
            (" ", KeyCode::Char(' '), NONE),
            ("\r", KeyCode::Enter, NONE),
            ("\n", KeyCode::Enter, NONE),
            ("\t", KeyCode::Tab, NONE),
            ("\x1b[Z", KeyCode::BackTab, NONE),
            ("\x7f", KeyCode::Backspace, NONE),
            ("\x08", KeyCode::Backspace, NONE),
            ("\x03", KeyCode::Char('c'), CONTROL),
            ("\x1a", KeyCode::Char('z'), CONTROL),
            ("\x00", KeyCode::Char(' '), CONTROL),
            ("\x1b", KeyCode::Esc, NONE),
            ("\x1ba", KeyCode::Char('a'), ALT),
            ("\x1bτ", KeyCode::Char('τ'), ALT),
            ("\x1b[", KeyCode::Char('['), ALT),
            ("\x1b[A", KeyCode::Up, NONE),
            ("\x1bOB", KeyCode::Down, NONE),
            ("\x1b[1;5C", KeyCode::Right, CONTROL),
            ("\x1b[1;2D", KeyCode::Left, SHIFT),
            ("\x1b[1;3H", KeyCode::Home, ALT),
            ("\x1b[4~", KeyCode::End, NONE),
            ("\x1b[F", KeyCode::End, NONE),
            ("\x1b[7~", KeyCode::Home, NONE),
            ("\x1b[2~", KeyCode::Insert, NONE),
            ("\x1b[3;5~", KeyCode::Delete, CONTROL),
            ("\x1b[5~", KeyCode::PageUp, NONE),
            ("\x1b[6~", KeyCode::PageDown, NONE),
            ("\x1bOP", KeyCode::F(1), NONE),
            ("\x1b[[E", KeyCode::F(5), NONE),
            ("\x1b[15~", KeyCode::F(5), NONE),
            ("\x1b[17~", KeyCode::F(6), NONE),
            ("\x1b[24~", KeyCode::F(12), NONE),
            ("\x1b[1;2S", KeyCode::F(4), SHIFT),
            ("\x1bOM", KeyCode::Enter, NONE),
            ("\x1bOq", KeyCode::Char('1'), NONE),
            ("\x1bOk", KeyCode::Char('+'), NONE),
            ("\x1b[99;5u", KeyCode::Char('c'), CONTROL),
        ] {
            assert_eq!(typed(bytes.as_bytes()), key(code, modifiers), "{bytes:?}");
        }
    }

    #[test]
    fn what_is_not_a_key_is_passed_over_and_the_next_key_is_not_lost() {
        for noise in [
            &b"\x1b[I"[..],
            b"\x1b[?1;2c",
            b"\x1b[12;40R\x1b[201~",
            b"\x1b[<0;3;4M",
            b"\xff\x80",
            b"\xc2\x9b",
            b"\xe7\x8a",
            b"\x1b[1;",
        ] {
            let mut bytes = noise.to_vec();
            bytes.extend(b"\x1b[A");
            let keys = typed(&bytes);
            let up = key(KeyCode::Up, NONE);
            assert_eq!(keys.last(), up.last(), "{noise:?} gave {keys:?}");
        }
    }

    #[test]
    fn the_way_bytes_are_cut_up_does_not_matter() {
        let bytes = "aτ\x1b[1;5C\x1bOA\x1b[200~to 12 h\r\x03犬\x1b[201~q\x1b[6~犬".as_bytes();
        let whole = typed(bytes);
        assert_eq!(whole.len(), 8);
        assert_eq!(whole[4], Typed::Paste("to 12 h\r\x03犬".to_owned()));
        for cut in 0..bytes.len() {
            let (mut parser, mut keys) = (KeyParser::default(), Vec::new());
            parser.feed(&bytes[..cut], &mut keys);
            parser.feed(&bytes[cut..], &mut keys);
            assert_eq!(keys, whole, "cut at {cut}");
            assert!(!parser.is_in_sequence() && !parser.is_in_paste());
        }
    }

    #[test]
    fn a_paste_without_end_is_given_up_and_a_long_one_is_cut() {
        assert_eq!(typed(b"\x1b[200~half"), [Typed::Paste("half".to_owned())]);
        let mut bytes = b"\x1b[200~".to_vec();
        bytes.extend(std::iter::repeat_n(b'x', PASTE_LIMIT + 500));
        bytes.extend(PASTE_END);
        bytes.push(b'y');
        let keys = typed(&bytes);
        assert_eq!(keys.len(), 2);
        match &keys[0] {
            Typed::Paste(text) => assert_eq!(text.len(), PASTE_LIMIT),
            Typed::Key(key) => panic!("{key:?} instead of a paste"),
        }
    }

    #[test]
    fn no_bytes_at_all_can_break_the_reading() {
        let alphabet =
            b"\x1b\x1b\x1b[[O0129;~ABZuM?\x00\x08\r\x7f\x80\x9b\xc2\xe7\x8a\xac\xf0\xffa";
        let mut state = 0x2545_f491_4f6c_dd1d_u64;
        for _ in 0..2000 {
            let bytes: Vec<u8> = (0..40)
                .map(|_| {
                    state ^= state << 13;
                    state ^= state >> 7;
                    state ^= state << 17;
                    alphabet[(state % alphabet.len() as u64) as usize]
                })
                .collect();
            let (mut parser, mut keys) = (KeyParser::default(), Vec::new());
            for byte in &bytes {
                parser.feed(&[*byte], &mut keys);
            }
            parser.give_up(&mut keys);
            assert!(!parser.is_in_sequence(), "{bytes:?}");
        }
        let mut endless = b"\x1b[".to_vec();
        endless.extend([b'1'; 500]);
        let (mut parser, mut keys) = (KeyParser::default(), Vec::new());
        parser.feed(&endless, &mut keys);
        assert!(parser.begun.len() < 2 * SEQUENCE_LIMIT);
    }
}
