//! Canonical JSON, SHA-256 and the chains, against what others publish or compute.
use aforesaid::canon::chain::{Chain, LinkError};
use aforesaid::canon::hash::{Digest, Hasher, sha256};
use aforesaid::canon::json::{CanonError, MAX_DEPTH, file_bytes, from_canonical, from_file_bytes, read_lines, to_canonical};
use aforesaid::canon::number::Finite;
use proptest::prelude::*;
use serde_json::{Value, json};

fn canonical_text<T: serde::Serialize + ?Sized>(value: &T) -> String {
    String::from_utf8(to_canonical(value).unwrap()).unwrap()
}

/// NIST's example values for SHA-256 (FIPS 180-4; the two longest also by Python's hashlib).
#[test]
fn hashes_of_the_published_messages() {
    let two_blocks = b"abcdbcdecdefdefgefghfghighijhijkijkljklmklmnlmnomnopnopq";
    let three_blocks = b"abcdefghbcdefghicdefghijdefghijkefghijklfghijklmghijklmnhijklmnoijklmnopjklmnopqklmnopqrlmnopqrsmnopqrstnopqrstu";
    let million = vec![b'a'; 1_000_000];
    let examples: [(&[u8], &str); 5] = [
        (b"", "e3b0c44298fc1c149afbf4c8996fb92427ae41e4649b934ca495991b7852b855"),
        (b"abc", "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"),
        (two_blocks, "248d6a61d20638b8e5c026930c3e6039a33ce45964ff2167f6ecedd419db06c1"),
        (three_blocks, "cf5b16a778af8380036ce59e7b0492370b249b11e8f07a51afac45037afee9d1"),
        (&million, "cdc76e5c9914fb9281a1c7e284d73e67f1809a48a497200e046d39ccc7112cd0"),
    ];
    for (message, expected) in examples {
        assert_eq!(sha256(message).to_string(), expected);
        let mut pieces = Hasher::new();
        message.chunks(61).for_each(|piece| pieces.update(piece));
        assert_eq!(pieces.finish().to_string(), expected);
    }
}

#[test]
fn a_hash_in_text_is_64_lower_case_digits() {
    let abc = sha256(b"abc");
    assert_eq!(abc.to_string().parse::<Digest>(), Ok(abc));
    assert_eq!(abc.short(), "ba78 16bf 8f01 cfea");
    assert_eq!(canonical_text(&abc), format!("\"{abc}\""));
    for wrong in [abc.to_string().to_uppercase(), abc.to_string()[1..].to_owned(), "é".repeat(32)] {
        assert!(wrong.parse::<Digest>().is_err(), "{wrong}");
    }
}

/// RFC 8785 appendix B: IEEE 754 bits and the text of each number (from memory; Python's repr gives the same digits).
const NUMBERS: [(u64, &str); 24] = [
    (0x0000_0000_0000_0000, "0"),
    (0x8000_0000_0000_0000, "0"),
    (0x0000_0000_0000_0001, "5e-324"),
    (0x8000_0000_0000_0001, "-5e-324"),
    (0x7fef_ffff_ffff_ffff, "1.7976931348623157e+308"),
    (0xffef_ffff_ffff_ffff, "-1.7976931348623157e+308"),
    (0x4340_0000_0000_0000, "9007199254740992"),
    (0xc340_0000_0000_0000, "-9007199254740992"),
    (0x4430_0000_0000_0000, "295147905179352830000"),
    (0x44b5_2d02_c7e1_4af5, "9.999999999999997e+22"),
    (0x44b5_2d02_c7e1_4af6, "1e+23"),
    (0x44b5_2d02_c7e1_4af7, "1.0000000000000001e+23"),
    (0x444b_1ae4_d6e2_ef4e, "999999999999999700000"),
    (0x444b_1ae4_d6e2_ef4f, "999999999999999900000"),
    (0x444b_1ae4_d6e2_ef50, "1e+21"),
    (0x3eb0_c6f7_a0b5_ed8c, "9.999999999999997e-7"),
    (0x3eb0_c6f7_a0b5_ed8d, "0.000001"),
    (0x41b3_de43_5555_5553, "333333333.3333332"),
    (0x41b3_de43_5555_5554, "333333333.33333325"),
    (0x41b3_de43_5555_5555, "333333333.3333333"),
    (0x41b3_de43_5555_5556, "333333333.3333334"),
    (0x41b3_de43_5555_5557, "333333333.33333343"),
    (0xbecb_f647_612f_3696, "-0.0000033333333333333333"),
    (0x4314_3ff3_c1cb_0959, "1424953923781206.2"),
];

#[test]
fn numbers_are_written_as_rfc_8785_lists_them() {
    for (bits, text) in NUMBERS {
        let number = f64::from_bits(bits);
        assert_eq!(canonical_text(&number), text);
        assert_eq!(from_canonical::<f64>(text.as_bytes()), Ok(if number == 0.0 { 0.0 } else { number }));
        assert_eq!(from_canonical::<Value>(text.as_bytes()).map(|v| canonical_text(&v)), Ok(text.to_owned()));
    }
    // Section 3.2.2.3: the places where ECMAScript turns to an exponent.
    for (number, text) in [(1e20, "100000000000000000000"), (1e21, "1e+21"), (1e-6, "0.000001"), (1e-7, "1e-7")] {
        assert_eq!(canonical_text(&number), text);
    }
}

#[test]
fn what_has_no_number_in_json_is_refused_and_not_made_null() {
    for number in [f64::NAN, f64::INFINITY, f64::NEG_INFINITY] {
        assert_eq!(to_canonical(&number), Err(CanonError::NotFinite));
        assert_eq!(to_canonical(&[Some(1.0), Some(number)]), Err(CanonError::NotFinite));
        assert_eq!(Finite::new(number), None);
    }
    assert_eq!(canonical_text(&Finite::new(-0.0).unwrap()), "0");
    assert_eq!(from_canonical::<Finite>(b"3").map(Finite::get), Ok(3.0));
    let uneven = 9_007_199_254_740_993_u64; // 2^53 + 1, which no double holds
    assert_eq!(to_canonical(&uneven), Err(CanonError::WholeNumberTooLarge(uneven.to_string())));
    assert_eq!(from_canonical::<Value>(b"{\"n\":9007199254740993}"), Err(CanonError::NotCanonical { offset: 5 }));
}

/// RFC 8785 sections 3.2.2 and 3.2.3, the examples of literals, text and sorting (from memory).
#[test]
fn text_and_order_of_keys_are_as_in_the_rfc() {
    let value: Value = serde_json::from_str(
        r#"{"numbers": [333333333.33333329, 1E30, 4.50, 2e-3, 0.000000000000000000000000001],
            "string": "\u20ac$\u000F\u000aA'\u0042\u0022\u005c\\\"\/", "literals": [null, true, false]}"#,
    )
    .unwrap();
    assert_eq!(
        canonical_text(&value),
        r#"{"literals":[null,true,false],"numbers":[333333333.3333333,1e+30,4.5,0.002,1e-27],"string":"€$\u000f\nA'B\"\\\\\"/"}"#
    );
    let keys: Value = serde_json::from_str(
        r#"{"\u20ac": "Euro Sign", "\r": "Carriage Return", "\ufb33": "Hebrew Letter Dalet With Dagesh", "1": "One",
            "\ud83d\ude00": "Emoji: Grinning Face", "\u0080": "Control", "\u00f6": "Latin Small Letter O With Diaeresis"}"#,
    )
    .unwrap();
    assert_eq!(
        canonical_text(&keys),
        "{\"\\r\":\"Carriage Return\",\"1\":\"One\",\"\u{80}\":\"Control\",\"ö\":\"Latin Small Letter O With Diaeresis\",\
         \"€\":\"Euro Sign\",\"😀\":\"Emoji: Grinning Face\",\"\u{fb33}\":\"Hebrew Letter Dalet With Dagesh\"}"
    );
}

#[test]
fn anything_but_the_canonical_form_is_refused_where_it_differs() {
    let not_canonical = |offset| CanonError::NotCanonical { offset };
    let cases: [(&str, CanonError); 9] = [
        (r#"{"a": 1}"#, not_canonical(5)),
        (r#"{"b":1,"a":2}"#, not_canonical(2)),
        (r#"{"a":0.10}"#, not_canonical(8)),
        (r#"{"a":-0}"#, not_canonical(5)),
        (r#"{"a":1e0}"#, not_canonical(6)),
        (r#"{"a":"\u00e9"}"#, not_canonical(6)),
        (r#"{"a":"\/"}"#, not_canonical(6)),
        (r#"{"a":1,"b":2,"a":1}"#, CanonError::KeyTwice { key: "a".into(), offset: Some(15) }),
        ("{\"a\":1}\n", not_canonical(7)),
    ];
    for (text, expected) in cases {
        assert_eq!(from_canonical::<Value>(text.as_bytes()), Err(expected), "{text}");
    }
    for (text, expected) in [
        (&br#"{"a":"\ud83d"}"#[..], "hex escape"),
        (b"{\"a\":\"\xff\"}", "unicode"),
        (b"\xef\xbb\xbf{}", "expected value"),
        (b"{} {}", "trailing"),
        (b"[1e400]", "out of range"),
        (b"", "EOF"),
    ] {
        let Err(CanonError::NotJson { message, .. }) = from_canonical::<Value>(text) else {
            panic!("{text:?} was taken");
        };
        assert!(message.contains(expected), "{message}");
    }
}

#[test]
fn depth_has_one_limit_for_writing_and_reading() {
    let nested = |depth: usize| format!("{}{}", "[".repeat(depth), "]".repeat(depth));
    let deepest: Value = from_canonical(nested(MAX_DEPTH).as_bytes()).unwrap();
    assert_eq!(canonical_text(&deepest), nested(MAX_DEPTH));
    assert_eq!(to_canonical(&[deepest]), Err(CanonError::TooDeep { offset: None }));
    for depth in [MAX_DEPTH + 1, 1_000_000] {
        let error = from_canonical::<Value>(nested(depth).as_bytes());
        assert_eq!(error, Err(CanonError::TooDeep { offset: Some(MAX_DEPTH) }));
    }
}

#[test]
fn files_and_lines_end_in_one_line_feed() {
    assert_eq!(file_bytes(&json!({"a": 1})).unwrap(), b"{\"a\":1}\n");
    assert_eq!(from_file_bytes::<Value>(b"{\"a\":1}\n"), Ok(json!({"a": 1})));
    assert_eq!(from_file_bytes::<Value>(b"{\"a\":1}"), Err(CanonError::LineFeed { offset: 7 }));
    assert_eq!(from_file_bytes::<Value>(b"{\"a\":1}\n\n"), Err(CanonError::LineFeed { offset: 8 }));
    assert_eq!(from_file_bytes::<Value>(b"{\"a\":1}\r\n"), Err(CanonError::NotCanonical { offset: 7 }));
    let found = read_lines(b"{\"a\":1}\n{\"a\": 2}\n{\"a\"");
    assert_eq!(found.lines.iter().map(|l| (l.number, l.start)).collect::<Vec<_>>(), [(1, 0), (2, 8)]);
    assert_eq!(found.lines[1].read::<Value>(), Err(CanonError::NotCanonical { offset: 13 }));
    assert_eq!(found.unterminated.map(|l| (l.start, l.bytes)), Some((17, &b"{\"a\""[..])));
    assert_eq!(read_lines(b"{}\n").unterminated, None);
}

#[test]
fn a_shape_that_does_not_fit_is_named() {
    #[derive(Debug, PartialEq, serde::Deserialize)]
    #[serde(deny_unknown_fields)]
    struct Point {
        #[serde(rename = "x")]
        _x: f64,
    }
    let Err(CanonError::WrongShape { offset: 9, message }) = from_canonical::<Point>(br#"{"x":1,"y":2}"#) else {
        panic!("an unknown key was taken");
    };
    assert!(message.contains("unknown field `y`"), "{message}");
}

/// Computed by Python's hashlib and json from the description in `canon::chain`, with the SHA-256 of the words "seal",
/// "meaning", "data", "allocation", "unblinded" for hashes.
#[test]
fn chains_are_as_another_program_computes_them() {
    let mut ledger = Chain::ledger(&sha256(b"seal"));
    assert_eq!(ledger.head().to_string(), LEDGER[0]);
    let first = ledger.append(&json!({"sequence": 1, "kind": "sealed", "plan": 1})).unwrap();
    assert_eq!(first.hash.to_string(), LEDGER[1]);
    let entry = json!({"sequence": 2, "kind": "data checked", "zebra": "é", "data": null});
    let second = ledger.append(&entry).unwrap();
    assert_eq!(second.hash.to_string(), LEDGER[2]);
    let expected = format!("{{\"data\":null,\"hash\":\"{}\",\"kind\":\"data checked\",\"sequence\":2,\"zebra\":\"é\"}}\n", LEDGER[2]);
    assert_eq!(String::from_utf8(second.line.clone()).unwrap(), expected);

    let mut again = Chain::ledger(&sha256(b"seal"));
    for link in [&first, &second] {
        assert_eq!(again.follow(link.line.trim_ascii_end()), Ok(link.hash));
    }
    let mut swapped = Chain::ledger(&sha256(b"seal"));
    assert!(matches!(swapped.follow(second.line.trim_ascii_end()), Err(LinkError::Hash { found, .. }) if found == second.hash));
    assert_eq!(swapped, Chain::ledger(&sha256(b"seal")));

    let hashes = [b"meaning".as_slice(), b"data", b"unblinded"].map(sha256);
    let root = |allocation: Option<&Digest>| Chain::decisions(&hashes[0], &hashes[1], allocation, &hashes[2]);
    assert_eq!(root(Some(&sha256(b"allocation"))).head().to_string(), DECISIONS[0]);
    let mut decisions = root(None);
    assert_eq!(decisions.head().to_string(), DECISIONS[1]);
    let entry = json!({"sequence": 1, "step": "omnibus", "verdict": "significant", "evidence": {"p": 0.0074}, "rule": {"level": 0.05}});
    assert_eq!(decisions.append(&entry).unwrap().hash.to_string(), DECISIONS[2]);
}

proptest! {
    /// What is written is read back, bit for bit, and written again the same.
    #[test]
    fn every_double_and_text_comes_back(number in proptest::num::f64::NORMAL | proptest::num::f64::SUBNORMAL, text in "\\PC*", control in proptest::char::range('\0', '\u{7f}')) {
        let value = json!({"n": number, format!("{text}{control}"): [text, control.to_string()]});
        let bytes = to_canonical(&value).unwrap();
        let back: Value = from_canonical(&bytes).unwrap();
        prop_assert_eq!(back["n"].as_f64().map(f64::to_bits), Some(number.to_bits()));
        prop_assert_eq!(to_canonical(&back).unwrap(), bytes);
    }

    /// No bytes make the reader panic, and what it takes is canonical.
    #[test]
    fn the_reader_takes_only_what_the_writer_writes(bytes in "[\\[\\]{}\",:0-9eE.\\\\ua +-]{0,40}") {
        if let Ok(value) = from_canonical::<Value>(bytes.as_bytes()) {
            prop_assert_eq!(to_canonical(&value).unwrap(), bytes.into_bytes());
        }
    }
}

const LEDGER: [&str; 3] = [
    "153bccfab008a6209d5af43778a58558904053143b686069ce961880cc62208b",
    "60994547ee5a53a8dc9fb2b6bc0f3ef46b18148a009b4331efedfacfa17a77b8",
    "3337dfbebf32299486104aac2970436b769df03876ef9931598acf063ff767c2",
];
const DECISIONS: [&str; 3] = [
    "ea4414296bd6eecdeb0bc6b5ec6486e183af39161a8855c09597df5829df2dfa",
    "e49a28eabfd52056b2e1670583e4d4714e3c5687ea1761c940395b10efcdb757",
    "22ee7d507eea288c6d60d33aea5200098b5b04e6b1a0d6aa47fceedb3776f793",
];
