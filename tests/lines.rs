//! A line either parses whole or is rejected with a reason, and nothing depends on how its bytes were cut into reads.

use proptest::prelude::*;
use steadytap::config::{Channel, Convert, LineFormat, Port, Rig};
use steadytap::stream::number;
use steadytap::stream::record::{self, Reader, Told};
use steadytap::stream::splitter::{LONGEST_LINE, Piece, Splitter};
use steadytap::stream::{Decoder, Reject};
use steadytap::units::{Quantity, StreamTime};

fn port_of(name: &str, format: LineFormat, columns: &[&str]) -> Port {
    Port {
        name: name.to_string(),
        device: None,
        usb: None,
        baud: 115_200,
        format,
        columns: columns.iter().map(ToString::to_string).collect(),
        dtr: true,
    }
}

/// A decoder of a port whose channels use `p1` and `p2`.
fn decoder(format: LineFormat, columns: &[&str]) -> Decoder {
    let port = port_of("gauge", format, columns);
    let channel = |field: &str| Channel {
        name: field.to_string(),
        port: "gauge".to_string(),
        field: field.to_string(),
        quantity: Quantity::Other,
        unit: String::new(),
        convert: Convert::Linear { gain: 1.0, offset: 0.0 },
        range: None,
        lag_s: 0.0,
        tube: None,
        damping_s: 0.0,
        stale_s: 1.0,
    };
    let rig = Rig { ports: vec![port.clone()], channels: vec![channel("p1"), channel("p2")] };
    Decoder::new(&rig, &port)
}

fn values(decoder: &mut Decoder, line: &str) -> Result<Vec<Option<f64>>, Reject> {
    decoder.decode(line.as_bytes()).map(<[_]>::to_vec)
}

#[test]
fn columns_take_every_usual_separator() {
    let mut d = decoder(LineFormat::Columns, &["p1", "p2"]);
    for line in ["1.5,-2", "1.5;-2", "1.5\t-2", "1.5 -2", " 1.5 ,  -2 ", "1.5   -2", "+1.5,-2.0", "15e-1,-.2e1"] {
        assert_eq!(values(&mut d, line), Ok(vec![Some(1.5), Some(-2.0)]), "{line:?}");
    }
}

#[test]
fn columns_reject_what_is_no_finite_decimal_or_another_count() {
    let mut d = decoder(LineFormat::Columns, &["p1", "p2"]);
    for (line, why) in [
        ("", Reject::Empty),
        ("   ", Reject::Empty),
        ("1", Reject::FieldCount { have: 1, need: 2 }),
        ("1,2,3", Reject::FieldCount { have: 3, need: 2 }),
        ("1,2,", Reject::FieldCount { have: 3, need: 2 }),
        ("1,", Reject::NotANumber { field: 2 }),
        (",1", Reject::NotANumber { field: 1 }),
        ("1,,2", Reject::NotANumber { field: 2 }),
        ("nan,1", Reject::NotANumber { field: 1 }),
        ("1,inf", Reject::NotANumber { field: 2 }),
        ("1,-inf", Reject::NotANumber { field: 2 }),
        ("1e999,1", Reject::NotANumber { field: 1 }),
        ("0x10,1", Reject::NotANumber { field: 1 }),
        ("1_0,1", Reject::NotANumber { field: 1 }),
        ("1,2\0", Reject::NotANumber { field: 2 }),
        ("\u{1b}]0;x\u{7}", Reject::NotANumber { field: 1 }),
        ("banner v1.2", Reject::NotANumber { field: 1 }),
        ("1.5.2,1", Reject::NotANumber { field: 1 }),
        ("1e,1", Reject::NotANumber { field: 1 }),
        ("--1,1", Reject::NotANumber { field: 1 }),
    ] {
        assert_eq!(values(&mut d, line), Err(why), "{line:?}");
    }
    // A decimal comma where one number is wanted is two numbers.
    let mut one = decoder(LineFormat::Columns, &["p1"]);
    assert_eq!(values(&mut one, "1,234"), Err(Reject::FieldCount { have: 2, need: 1 }));
}

#[test]
fn pairs_and_json_give_the_names_in_the_line_and_no_others() {
    let mut d = decoder(LineFormat::Pairs, &[]);
    assert_eq!(values(&mut d, "p1=12.3 p2=-4.0"), Ok(vec![Some(12.3), Some(-4.0)]));
    assert_eq!(values(&mut d, "p2:-4,state:ok"), Ok(vec![None, Some(-4.0)]));
    assert_eq!(values(&mut d, "p1=nan"), Err(Reject::NotANumber { field: 1 }));
    assert_eq!(values(&mut d, "hello"), Err(Reject::NotAPair { field: 1 }));
    assert_eq!(values(&mut d, ""), Err(Reject::Empty));
    let mut d = decoder(LineFormat::Json, &[]);
    assert_eq!(values(&mut d, r#"{"p1": 12.3, "id": "x", "p2": -4}"#), Ok(vec![Some(12.3), Some(-4.0)]));
    assert_eq!(values(&mut d, r#"{"p1": null}"#), Ok(vec![None, None]));
    for bad in [r#"{"p1": {"a": 1}}"#, r#"{"p1": 1"#, "[1]", r#"{"p1": NaN}"#, r#"{"p1": 1e999}"#] {
        assert_eq!(values(&mut d, bad), Err(Reject::NotFlatJson), "{bad}");
    }
    assert_eq!(values(&mut d, r#"{"p1": "12"}"#), Err(Reject::NotANumber { field: 1 }));
}

/// A sentence with its checksum, after NMEA 0183.
fn sentence(body: &str) -> String {
    format!("${body}*{:02X}", body.bytes().fold(0, |sum, c| sum ^ c))
}

#[test]
fn an_nmea_checksum_is_two_hexadecimal_digits_and_no_sign() {
    // The characters of this body sum to less than 16, so that a sign and one digit would name the sum.
    let body = ('A'..='Z').map(|c| format!("GPXX{c},,A")).find(|b| b.bytes().fold(0, |s, c| s ^ c) < 16).unwrap();
    let sum = body.bytes().fold(0, |s, c| s ^ c);
    let mut d = decoder(LineFormat::Nmea, &[]);
    assert!(values(&mut d, &format!("${body}*{sum:02x}")).is_ok());
    assert_eq!(values(&mut d, &format!("${body}*+{sum:X}")), Err(Reject::NoChecksum));
}

#[test]
fn an_nmea_time_or_date_that_is_none_is_rejected() {
    let mut d = decoder(LineFormat::Nmea, &[]);
    let rmc = |time: &str, date: &str| sentence(&format!("GPRMC,{time},A,4807.038,N,01131.000,E,022.4,084.4,{date},,"));
    assert!(values(&mut d, &rmc("123519.25", "230394")).is_ok());
    for time in ["1235", "12351", "+1+2+3", "1.2.3.", "12351e300", "1235-9", "996199", "126019", "123561", "1235190"] {
        assert_eq!(values(&mut d, &rmc(time, "230394")), Err(Reject::NotANumber { field: 2 }), "{time}");
    }
    for date in ["+30394", "2303", "2303994"] {
        assert_eq!(values(&mut d, &rmc("123519", date)), Err(Reject::NotANumber { field: 10 }), "{date}");
    }
}

#[test]
fn without_a_fix_the_receiver_is_said_to_have_none_whichever_sentence_tells() {
    let fix = |q: u8| sentence(&format!("GPGGA,123519,4807.038,N,01131.000,E,{q},08,0.9,545.4,M,46.9,M,,"));
    let mut d = decoder(LineFormat::Nmea, &[]);
    for (line, no_fix) in [
        (fix(0), true),
        (fix(1), false),
        (sentence("GPRMC,123519,V,,,,,,,230394,,"), true),
        (sentence("GPRMC,123519,A,4807.038,N,01131.000,E,022.4,084.4,230394,,"), false),
    ] {
        values(&mut d, &line).unwrap();
        assert_eq!(d.gps().no_fix, no_fix, "{line}");
    }
}

/// Slots: speed km/h, track, lat, lon, altitude, fix.
#[test]
fn only_what_a_receiver_measured_is_used() {
    let decode = |lines: &[&str]| {
        let mut d = decoder(LineFormat::Nmea, &[]);
        let mut last = Vec::new();
        for body in lines {
            last = values(&mut d, &sentence(body)).unwrap();
        }
        last
    };
    let rmc = |status: &str, knots: &str, mode: &str| {
        format!("GNRMC,123519,{status},4807.038,N,01131.000,E,{knots},084.4,230394,,{mode}")
    };
    let none = vec![None; 6];
    for mode in ["", ",A", ",D", ",R", ",F", ",P"] {
        assert!(decode(&[&rmc("A", "054.0", mode)])[0].is_some_and(|v| (v - 100.008).abs() < 1e-9), "{mode}");
    }
    // Without a fix, estimated, manual, simulated or invalid: nothing.
    assert_eq!(decode(&[&rmc("V", "054.0", "")]), none);
    for mode in [",E", ",M", ",S", ",N"] {
        assert_eq!(decode(&[&rmc("A", "054.0", mode)]), none, "{mode}");
    }
    // An empty speed is none, and below 1 m/s the course is noise.
    assert_eq!(decode(&[&rmc("A", "", "")])[..2], [None, None]);
    assert_eq!(decode(&[&rmc("A", "001.9", "")])[1], None);
    assert_eq!(decode(&[&rmc("A", "002.0", "")])[1], Some(84.4));
    // VTG repeats RMC and is used only where there is none.
    let vtg = "GPVTG,054.7,T,034.4,M,005.5,N,010.2,K";
    assert_eq!(decode(&[vtg])[..2], [Some(10.2), Some(54.7)]);
    assert_eq!(decode(&["GPVTG,054.7,T,034.4,M,000.5,N,001.0,K"])[..2], [Some(1.0), None]);
    assert_eq!(decode(&[&rmc("A", "054.0", ""), vtg]), none);
    // GGA without a fix tells that it has none, and no place.
    let gga = |q: u8| format!("GPGGA,123519,4807.038,N,01131.000,E,{q},08,0.9,545.4,M,46.9,M,,");
    assert_eq!(decode(&[&gga(0)]), vec![None, None, None, None, None, Some(0.0)]);
    assert_eq!(decode(&[&gga(1)])[4..], [Some(545.4), Some(1.0)]);
}

fn pieces(bytes: &[u8], chunks: impl Iterator<Item = usize>) -> Vec<(bool, Vec<u8>)> {
    let (mut splitter, mut rest, mut out) = (Splitter::default(), bytes, Vec::new());
    for n in chunks {
        let (head, tail) = rest.split_at(n.min(rest.len()));
        splitter.push(head, |piece| match piece {
            Piece::Line(line) => out.push((false, line.to_vec())),
            Piece::Cut(line) => out.push((true, line.to_vec())),
        });
        rest = tail;
    }
    assert!(rest.is_empty(), "all was fed");
    out
}

#[test]
fn a_line_without_end_is_cut_and_memory_stays_bounded() {
    let mut bytes = vec![b'A'; 10 << 20];
    bytes.extend_from_slice(b"\nnext\r\n");
    let got = pieces(&bytes, std::iter::repeat_n(4096, bytes.len() / 4096 + 1));
    assert_eq!(got.len(), 2);
    assert!(got[0].0 && got[0].1.len() == LONGEST_LINE);
    assert_eq!(got[1], (false, b"next".to_vec()));
    assert_eq!(got, pieces(&bytes, std::iter::once(bytes.len())), "in one read as in many");
    // Just the longest length, with CR LF, is whole.
    let mut bytes = vec![b'B'; LONGEST_LINE];
    bytes.extend_from_slice(b"\r\n");
    for chunk in [1000, bytes.len()] {
        let got = pieces(&bytes, std::iter::repeat_n(chunk, bytes.len() / chunk + 1));
        assert_eq!(got, [(false, vec![b'B'; LONGEST_LINE])]);
    }
}

fn told(bytes: &[u8], chunk: usize) -> (Vec<String>, record::Tally) {
    let mut reader = Reader::new(None);
    let mut all = Vec::new();
    for piece in bytes.chunks(chunk.max(1)) {
        reader.push(piece, &mut |t: Told<'_>| all.push(format!("{t:?}")));
    }
    reader.finish();
    (all, reader.tally)
}

#[test]
fn damage_in_a_record_is_passed_over_and_told() {
    let record =
        b"# steadytap record 1\n# started 2026-06-14T09:12:03.250Z\n1.000000 gauge 1\nno head\n0.500000 gauge back\n\
        2.000000 gauge 2\n2.1 gauge short\n3.000000 @take\n4.000000 !gauge lost\n5.000000 gauge torn";
    let (all, tally) = told(record, 7);
    assert_eq!(all.len(), 4, "{all:?}");
    assert_eq!((tally.good, tally.damaged), (4, 4));
    assert_eq!(tally.first_damage, Some((4, "no `seconds port line` head")));
    assert_eq!(tally.started.as_deref(), Some("2026-06-14T09:12:03.250Z"));
}

#[test]
fn ports_that_the_rig_does_not_name_neither_count_nor_move_the_time() {
    let ports = [port_of("gauge", LineFormat::Columns, &["p1"])];
    let mut reader = Reader::new(Some(&ports));
    let record = b"5.000000 other 1\n9.000000 !other lost\n1.000000 gauge 1\n0.500000 other 2\n1.000000 gauge 2\n2.000000 gaug 3\n";
    let mut times = Vec::new();
    reader.push(record, &mut |told| {
        let Told::Line { at, port: 0, .. } = told else { panic!("{told:?}") };
        times.push(at.micros());
    });
    reader.finish();
    assert_eq!(times, [1_000_000, 1_000_000]);
    assert_eq!((reader.tally.unknown_port, reader.tally.damaged), (4, 0));
}

#[test]
fn a_record_line_longer_than_any_is_damage_however_it_was_read() {
    let mut record = b"1.000000 gauge ".to_vec();
    record.resize(4 * LONGEST_LINE + 300, b'A');
    record.extend_from_slice(b"\n2.000000 gauge 2\n");
    let whole = told(&record, record.len());
    assert_eq!((whole.1.good, whole.1.damaged), (1, 1));
    assert_eq!(whole, told(&record, 4096));
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 300, failure_persistence: None, ..ProptestConfig::default() })]

    #[test]
    fn lines_do_not_depend_on_the_reads(bytes in prop::collection::vec(prop::sample::select(b"a1,.\r\n\\x".to_vec()), 0..200), cuts in prop::collection::vec(1usize..9, 200)) {
        let whole = pieces(&bytes, std::iter::once(bytes.len()));
        prop_assert_eq!(&whole, &pieces(&bytes, std::iter::repeat_n(1, bytes.len())));
        prop_assert_eq!(&whole, &pieces(&bytes, cuts.into_iter().chain([200])));
    }

    #[test]
    fn a_record_does_not_depend_on_the_reads(bytes in prop::collection::vec(prop::sample::select(b"0123. gauge@!take\r\n\\x#".to_vec()), 0..300), chunk in 1usize..50) {
        prop_assert_eq!(told(&bytes, 300), told(&bytes, chunk));
    }

    #[test]
    fn any_bytes_come_back_from_a_record_line(line in prop::collection::vec(any::<u8>(), 0..100), us in 0i64..9_000_000_000) {
        let mut record = Vec::new();
        record::write_line(&mut record, StreamTime::from_micros(us), "gauge", &line);
        let printable = record[..record.len() - 1].iter().all(|c| (0x20..=0x7E).contains(c));
        prop_assert!(printable);
        let read = record::parse(&record[..record.len() - 1]);
        let Some(record::Line::Port { at, port, escaped }) = read else { return Err(TestCaseError::fail("no line")) };
        prop_assert_eq!((at.micros(), port), (us, &b"gauge"[..]));
        let unescaped = record::unescape(escaped);
        prop_assert_eq!(unescaped.as_ref(), &line[..]);
    }

    #[test]
    fn a_number_is_what_the_standard_library_reads(text in "[+-]?[0-9]{0,20}(\\.[0-9]{0,20})?(e[+-]?[0-9]{1,3})?") {
        let expected = text.parse::<f64>().ok().filter(|x| x.is_finite());
        prop_assert_eq!(number::whole(text.as_bytes()).map(f64::to_bits), expected.map(f64::to_bits));
    }
}
