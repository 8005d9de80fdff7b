use super::{Below, ColumnKind, CsvCell, CsvError, CsvOptions, CsvText};

fn kind(title: &str) -> ColumnKind {
    match title {
        "pH" | "Ca" => ColumnKind::Numbers,
        "name" => ColumnKind::Texts,
        _ => ColumnKind::ByContent,
    }
}

fn read_with(text: &str, options: &CsvOptions) -> Result<CsvText, CsvError> {
    CsvText::read(text.as_bytes(), options, kind)
}

fn read(text: &str) -> CsvText {
    read_with(text, &CsvOptions::default()).unwrap()
}

fn number(value: f64) -> CsvCell {
    CsvCell::Number { value, sigma: None }
}

fn text(text: &str) -> CsvCell {
    CsvCell::Text(text.to_owned())
}

fn columns(file: &CsvText) -> Vec<String> {
    file.columns.iter().map(ToString::to_string).collect()
}

/// The faults of all rows, as their messages.
#[track_caller]
fn faults(file: &str, expected: &[&str]) {
    let messages: Vec<String> =
        read(file).rows.iter().flat_map(|row| &row.faults).map(ToString::to_string).collect();
    assert_eq!(messages, expected);
}

#[track_caller]
fn refused(bytes: &[u8], expected: &str) {
    let error = CsvText::read(bytes, &CsvOptions::default(), kind).unwrap_err();
    assert_eq!(error.to_string(), expected);
}

#[test]
fn a_survey() {
    let file =
        read("name,pH,Ca [mg/L],Ca +/- [mg/L],colour,depth\n1,8.15,41.2,0.8,brown,5\n2,NA,39.8,,ND,7.5\n");
    assert_eq!(columns(&file), ["name", "pH", "Ca [mg/L]", "colour", "depth"]);
    assert_eq!(
        file.columns.iter().map(|c| c.is_numeric).collect::<Vec<_>>(),
        [false, true, true, false, true]
    );
    let calcium = CsvCell::Number { value: 41.2, sigma: Some(0.8) };
    assert_eq!(file.rows[0].cells, [text("1"), number(8.15), calcium, text("brown"), number(5.0)]);
    // `ND` is missing as a number and a word as a colour.
    assert_eq!(file.rows[1].cells, [text("2"), CsvCell::Missing, number(39.8), text("ND"), number(7.5)]);
    assert_eq!(file.rows.iter().map(|row| row.line).collect::<Vec<_>>(), [2, 3]);
    assert_eq!(file.replacements, []);
}

#[test]
fn layout() {
    let expected = read("pH,Ca [mg/L]\n8.15,41.2\n");
    for same in [
        "\u{FEFF}pH,Ca [mg/L]\n8.15,41.2\n",
        "pH;Ca [mg/L]\n8.15;41.2\n",
        "pH\tCa [mg/L]\n8.15\t41.2\n",
        "pH,Ca [mg/L]\r\n8.15,41.2\r\n",
        "pH,Ca [mg/L]\r8.15,41.2",
    ] {
        assert_eq!(read(same), expected, "{same:?}");
    }
    assert_eq!(read("pH,Ca [mg/L],,\n8.15,41.2,,\n,,,\n"), expected); // columns and rows a spreadsheet left behind
    assert_eq!(
        columns(&read("\"Ca\n [mg/L]\";\"alkalinity, total\"\n1;2\n")),
        ["Ca [mg/L]", "alkalinity, total"]
    );
}

#[test]
fn lines_are_those_of_the_file() {
    for end in ["\n", "\r\n", "\r"] {
        let file = "pH,note\n\n7,a\n8,\"two\nlines\"\n\n\n9,b\n".replace('\n', end);
        let lines: Vec<u64> = read(&file).rows.iter().map(|row| row.line).collect();
        assert_eq!(lines, [3, 4, 8], "{end:?}");
    }
}

#[test]
fn files_that_cannot_be_read() {
    let needed =
        "the file is empty: a header line such as `name,pH,Ca [mg/L]` and one line a sample are needed";
    refused(b"", needed);
    refused(b"\xEF\xBB\xBF", needed);
    refused(b" \n\n,,\n", needed);
    refused(b"name,pH\n", "the file has a header and no rows");
    refused(b"name,pH\n,\n", "the file has a header and no rows");
    refused(b"\xFF\xFEp\0H\0", "the file is in UTF-16: save it as UTF-8 (in a spreadsheet, `CSV UTF-8`)");
    refused(b"p\0H\0\n\0", "the file is in UTF-16: save it as UTF-8 (in a spreadsheet, `CSV UTF-8`)");
    refused(
        b"name,pH\nnorth,8\nM\xFChle,7\n",
        "line 3, character 2: byte 0xFC is not UTF-8 (it would be `\u{fc}` in Latin-1): save the file as UTF-8 (in a spreadsheet, `CSV UTF-8`)",
    );
    refused(
        b"name,\x81\n",
        "line 1, character 6: byte 0x81 is not UTF-8: save the file as UTF-8 (in a spreadsheet, `CSV UTF-8`)",
    );
    refused(b"name,pH\n\"north,8\nsouth,7\n", "line 2: a quote is opened and never closed");
    refused(
        b"name;Ca, total\nnorth;8\n",
        "the header could be separated by `,` or by `;`: put header cells that hold one of them in quotes",
    );
}

#[test]
fn headers_that_cannot_be_read() {
    refused(b"name,pH,\nnorth,8,41.2\n", "column 3 has no header, but line 2 holds `41.2` there");
    refused(b"name,,pH\nnorth,,8\n", "column 2 has no header, but line 2 holds `` there");
    refused(b"pH,name,pH\n8,north,7\n", "columns 1 and 3 are both called `pH`");
    refused(b"Ca [mg/L],Ca  [mg/L]\n8,7\n", "columns 1 and 2 are both called `Ca [mg/L]`");
    refused(b"pH,Ca +/- [mg/L]\n8,0.1\n", "`Ca +/- [mg/L]` has no column `Ca` to be the uncertainty of");
    refused(
        b"Ca [mg/L],Ca +/- [mmol/L]\n8,0.1\n",
        "`Ca +/- [mmol/L]` and `Ca [mg/L]` have different units: give the uncertainty in the unit of the value, or in `%` of it",
    );
    refused(
        b"Ca [mg/L],Ca +/- [mg/L],Ca +/- [%]\n8,0.1,1\n",
        "`Ca +/- [mg/L]` and `Ca +/- [%]` are both uncertainties of `Ca [mg/L]`: leave one of them out",
    );
}

#[test]
fn a_bad_row_spoils_only_itself() {
    let file =
        "name,pH,Ca [mg/L]\nnorth,8.15,41.2\nsouth,\"8,2\",>200\neast,7,9,1\nwest,8\nhill,7.0,40 mg/L\n";
    faults(
        file,
        &[
            "line 3, `pH`: `8,2` has a decimal comma: write `8.2`",
            "line 3, `Ca [mg/L]`: `>200` is a lower bound, not a value: leave the cell empty, or give a value with its uncertainty",
            "line 4: 4 cells where the header has 3: put a text with a separator in it in quotes, and write decimals with a point",
            "line 5: 2 cells where the header has 3: separate empty cells too",
            "line 6, `Ca [mg/L]`: `40 mg/L`: a unit belongs in the header, as `… [mg/L]`",
        ],
    );
    let file = read(file);
    assert!(file.rows[0].faults.is_empty());
    assert_eq!(file.rows[1].cells, [text("south"), text("8,2"), text(">200")]);
    assert_eq!(file.rows[3].cells, [text("west"), text("8"), CsvCell::Missing]);
}

#[test]
fn uncertainties() {
    let sigma = |file: &str| match read(file).rows[0].cells[0] {
        CsvCell::Number { sigma, .. } => sigma,
        _ => panic!("a number was expected"),
    };
    assert_eq!(sigma("Ca [mg/L],Ca +/- [mg/L]\n40,0.8\n"), Some(0.8));
    assert_eq!(sigma("Ca [mg/L],Ca [mg/L] ±\n40,0.8\n"), Some(0.8));
    assert_eq!(sigma("Ca [mg/L],Ca +/-\n40,0.8\n"), Some(0.8));
    assert_eq!(sigma("Ca [mg/L],Ca +/- [%]\n-40,2\n"), Some(0.8));
    assert_eq!(sigma("Ca [mg/L]\n40 +/- 0.8\n"), Some(0.8));
    assert_eq!(sigma("Ca [mg/L],Ca +/- [mg/L]\n40,-\n"), None);
    faults(
        "Ca [mg/L],Ca +/- [mg/L]\n40,-0.8\n40 +/- 1,0.8\n,0.8\n",
        &[
            "line 2, `Ca +/- [mg/L]`: `-0.8`: a standard uncertainty cannot be negative",
            "line 3, `Ca +/- [mg/L]`: `0.8` is a second uncertainty: the cell of the value states one already",
        ],
    );
}

#[test]
fn missing_values() {
    let options =
        CsvOptions { missing: vec!["-9999".to_owned(), "n.d.".to_owned()], ..CsvOptions::default() };
    let file = read_with("pH,name\n-9999,a\n-9999.0,b\nn.d.,c\nn.a.,d\n,e\n7,f\n", &options).unwrap();
    let missing: Vec<bool> = file.rows.iter().map(|row| row.cells[0] == CsvCell::Missing).collect();
    assert_eq!(missing, [true, true, true, true, true, false]);
    faults(
        "pH\nn.d.\n7\n",
        &["line 2, `pH`: `n.d.` is not a number; if it marks a missing value, name it in `missing`"],
    );
}

#[test]
fn detection_limits() {
    #[track_caller]
    fn case(below: Below, used: CsvCell, message: &str) {
        let options = CsvOptions { below, ..CsvOptions::default() };
        let file = read_with("Fe [mg/L],Fe +/- [mg/L]\n<0.05,0.001\n0.2,\n", &options).unwrap();
        assert_eq!(file.rows[0].cells, [used]);
        assert_eq!(file.replacements.iter().map(ToString::to_string).collect::<Vec<_>>(), [message]);
    }
    let sigma = Some(0.05 / 12.0_f64.sqrt());
    case(
        Below::Half,
        CsvCell::Number { value: 0.025, sigma },
        "line 2, `Fe [mg/L]`: `<0.05` is taken as 0.025 +/- 0.0144",
    );
    case(Below::Zero, number(0.0), "line 2, `Fe [mg/L]`: `<0.05` is taken as 0");
    case(Below::Limit, number(0.05), "line 2, `Fe [mg/L]`: `<0.05` is taken as 0.05");
    case(Below::Skip, CsvCell::Missing, "line 2, `Fe [mg/L]`: `<0.05` is taken as missing");
    // In a column of texts it is a text.
    let texts = read("name,pH\n<0.05,7\n");
    assert_eq!((texts.rows[0].cells[0].clone(), texts.replacements.len()), (text("<0.05"), 0));
}

fn map(from: &str, to: &str) -> std::collections::BTreeMap<String, String> {
    [(from.to_owned(), to.to_owned())].into()
}

#[test]
fn renaming_columns_and_giving_units() {
    let file = "Hydrogencarbonate mg/l,Calcium\n140,41.2\n";
    let columns_option = map("Hydrogencarbonate mg/l", "alkalinity [mg/L as HCO3^-]");
    let options =
        CsvOptions { columns: columns_option, units: map("Calcium", "mg/L"), ..CsvOptions::default() };
    let read = read_with(file, &options).unwrap();
    assert_eq!(columns(&read), ["alkalinity [mg/L as HCO3^-]", "Calcium [mg/L]"]);
    assert_eq!(read.rows[0].cells, [number(140.0), number(41.2)]);

    #[track_caller]
    fn refused(options: CsvOptions, expected: &str) {
        let error = read_with("Calcium [mg/L],pH\n41.2,8\n", &options).unwrap_err();
        assert_eq!(error.to_string(), expected);
    }
    refused(
        CsvOptions { columns: map("Kalcium [mg/L]", "Ca [mg/L]"), ..CsvOptions::default() },
        "`columns` names a header `Kalcium [mg/L]` that the file does not have: did you mean `Calcium [mg/L]`? its headers are `Calcium [mg/L]`, `pH`",
    );
    refused(
        CsvOptions { units: map("Mg", "mg/L"), ..CsvOptions::default() },
        "`units` names a header `Mg` that the file does not have: its headers are `Calcium [mg/L]`, `pH`",
    );
    refused(
        CsvOptions { units: map("Calcium [mg/L]", "mmol/L"), ..CsvOptions::default() },
        "`units` gives `mmol/L` for `Calcium [mg/L]`, which states its unit: rename it in `columns` if the header is wrong",
    );
    refused(
        CsvOptions { columns: map("pH", " "), ..CsvOptions::default() },
        "`columns` gives `pH` no new header: write one, or leave the column as it is",
    );
    refused(
        CsvOptions { columns: map("Calcium [mg/L]", "pH"), ..CsvOptions::default() },
        "columns 1 and 2 are both called `pH`",
    );
}

#[test]
fn columns_may_swap_their_names() {
    let swapped: std::collections::BTreeMap<String, String> =
        map("a", "b").into_iter().chain(map("b", "a")).collect();
    let options = CsvOptions { columns: swapped, ..CsvOptions::default() };
    assert_eq!(columns(&read_with("a,b\n1,2\n", &options).unwrap()), ["b", "a"]);
}

#[test]
fn suggestions_for_headers_that_mean_nothing() {
    #[track_caller]
    fn case(header: &str, expected: Option<&str>) {
        let file = read(&format!("\"{header}\"\n1\n"));
        assert_eq!(file.columns[0].suggestion().as_deref(), expected);
    }
    case("Ca (mg/L)", Some("Ca [mg/L]"));
    case("Calcium, dissolved, mg/L", Some("Calcium, dissolved [mg/L]"));
    case("temperature °C", Some("temperature [°C]"));
    case("Fe(II)", None);
    case("sampling date", None);
    case("Ca [mg/L]", None);
}

#[test]
fn policies_below_detection() {
    assert_eq!("skip".parse(), Ok(Below::Skip));
    assert_eq!(
        "haf".parse::<Below>().unwrap_err().to_string(),
        "`below` is `haf`: did you mean `half`? `half`, `zero`, `limit` and `skip` are understood"
    );
}

proptest::proptest! {
    /// Whatever the bytes, there is an answer.
    #[test]
    fn no_bytes_cause_a_panic(bytes in proptest::collection::vec(proptest::sample::select(b"p1.,;\t\"'<>+-/ \n\r%[]\xC3\xBC\xFF\0".as_slice()), 0..80)) {
        let _ = CsvText::read(&bytes, &CsvOptions::default(), kind);
    }
}
