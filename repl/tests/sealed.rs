//! Files that can be checked: report, seal, verify, and what they say when something is wrong.

mod common;

use common::{Test, streams};

const SCRIPT: &str = r#"//| # A spring
//| Its **saturation** with calcite.
let waters = read_samples("spring.csv");
let spring = waters[0];
let state = spring.equilibrate();
print(state.pH);
record("SI of calcite", state.SI("calcite"));
record("name", "spring");
expect("pH as measured", state.pH, 7.2, 1e-6);
"#;
const DATA: &str = "name,pH,alkalinity [meq/L],Ca [mg/L]\nspring,7.2,4.9,92\n";

fn spring() -> Test {
    Test::new().file("spring.rhai", SCRIPT).file("spring.csv", DATA)
}

/// Exit code, standard output, standard error.
#[track_caller]
fn said(test: &Test, arguments: &[&str]) -> (i32, String, String) {
    let output = test.lysocline(arguments).output().expect("it starts");
    let (results, messages) = streams(&output);
    (output.status.code().unwrap_or(-1), results, messages)
}

fn text(test: &Test, file: &str) -> String {
    std::fs::read_to_string(test.path().join(file)).expect("a file")
}

fn write(test: &Test, file: &str, text: &str) {
    std::fs::write(test.path().join(file), text).expect("it can be written");
}

#[test]
fn a_sealed_file_runs_verifies_and_keeps_its_script() {
    let test = spring();
    assert_eq!(
        said(&test, &["seal", "spring.rhai"]),
        (0, String::new(), "sealed 3 values in spring.rhai\n".into())
    );
    let sealed = text(&test, "spring.rhai");
    assert!(sealed.starts_with(SCRIPT) && sealed.contains("label = \"SI of calcite\", value = "), "{sealed}");
    assert!(sealed.contains("path = \"spring.csv\"") && sealed.contains("==== ledger freshwater ===="));
    let (code, results, messages) = said(&test, &["verify", "spring.rhai"]);
    assert_eq!((code, results.as_str()), (0, "spring.rhai: 3 values as sealed\n"), "{messages}");
    assert_eq!(said(&test, &["run", "spring.rhai"]).0, 0);
    assert_eq!(said(&test, &["run", "--sealed", "spring.rhai"]).0, 0);
    // Sealing again replaces the block.
    assert_eq!(said(&test, &["seal", "spring.rhai"]).0, 0);
    assert_eq!(text(&test, "spring.rhai"), sealed);
}

#[test]
fn another_constant_is_found_and_named() {
    let test = spring();
    said(&test, &["seal", "spring.rhai"]);
    // A file sealed when calcite was a little less soluble: its ledger says so, and so do the digests.
    let sealed = text(&test, "spring.rhai");
    let calcite =
        sealed.lines().find(|line| line.contains("name = \"calcite\"")).expect("calcite").to_owned();
    let terms = calcite.find("\"1\" = ").expect("its terms") + 6;
    let end = terms + calcite[terms..].find([',', ' ', '}']).expect("an end");
    let constant: f64 = calcite[terms..end].parse().expect("a number");
    let other = format!("{}{:?}{}", &calcite[..terms], constant - 0.01, &calcite[end..]);
    // With it calcite was more supersaturated by as much.
    let value = sealed.find("label = \"SI of calcite\", value = ").expect("the value") + 33;
    let value_end = value + sealed[value..].find(',').expect("an end");
    let index: f64 = sealed[value..value_end].parse().expect("a number");
    let sealed = format!("{}{:?}{}", &sealed[..value], index + 0.01, &sealed[value_end..]);
    let digest = sealed.lines().find(|line| line.starts_with("// # digest ")).expect("a digest");
    let digest = format!("{digest}\n");
    write(&test, "spring.rhai", &resealed(&sealed.replacen(&calcite, &other, 1).replacen(&digest, "", 1)));
    let (code, results, messages) = said(&test, &["verify", "spring.rhai"]);
    assert_eq!(code, 1, "{results}{messages}");
    assert!(results.contains("the ledger `freshwater` has changed"), "{results}");
    assert!(results.contains("SI of calcite") && results.contains("calcite (log K"), "{results}");
    assert!(results.contains("1 of 3 values moved"), "{results}");
    // The one line of `run`, and the old constants on demand.
    let (code, _, messages) = said(&test, &["run", "spring.rhai"]);
    let notes = messages.lines().filter(|line| line.starts_with("note: ")).count();
    assert_eq!((code, notes), (0, 1), "{messages}");
    assert!(
        messages.starts_with("note: constants have changed since this file was sealed: `freshwater`"),
        "{messages}"
    );
    assert!(!said(&test, &["run", "--sealed", "spring.rhai"]).2.contains("note: "));
}

/// The block with the digest that belongs to its lines.
fn resealed(text: &str) -> String {
    let start = text.find("// ==== sealed by").expect("a seal");
    let end = text.find("// ==== end of seal").expect("its end");
    let digest = lysocline_engine::script::sandbox::digest_of(&text.as_bytes()[start..end]);
    format!("{}// ==== end of seal {digest} ====\n", &text[..end])
}

#[test]
fn what_was_edited_is_noticed() {
    let test = spring();
    said(&test, &["seal", "spring.rhai"]);
    let sealed = text(&test, "spring.rhai");
    let verdict = |script: &str| {
        write(&test, "spring.rhai", script);
        let (code, results, messages) = said(&test, &["verify", "spring.rhai"]);
        assert_eq!(code, 1, "{results}{messages}");
        format!("{results}{messages}")
    };
    let case = |script: &str, expected: &str| {
        let said = verdict(script);
        assert!(said.contains(expected), "{expected}\n{said}");
        assert_eq!(text(&test, "spring.rhai"), script, "the file is as it was");
    };
    case(&sealed.replacen("Its **sat", "Its sat", 1), "the script was edited after it was sealed");
    case(&sealed[..sealed.len() - 40], "the seal is cut off");
    case(&sealed.replacen("value = ", "value = 1", 1), "the seal was edited after it was written");
    case(&format!("{sealed}print(2);\n"), "there is text below the seal");
    let newer = sealed.replacen("// format = 1", "// format = 7", 1).replacen(
        "lysocline 0.1.0 ====",
        "lysocline 9.1.0 ====",
        1,
    );
    case(&newer, "was sealed by lysocline 9.1.0 in format 7");
    case(SCRIPT, "`spring.rhai` is not sealed");
    write(&test, "spring.csv", &DATA.replace("92", "93"));
    case(&sealed, "the file `spring.csv` that it reads has changed");
    std::fs::remove_file(test.path().join("spring.csv")).expect("it is there");
    case(&sealed, "there is no file `spring.csv`");
}

#[test]
fn what_cannot_be_sealed_stays_as_it_was() {
    let test = Test::new().file("a.rhai", "print(1);").file("b.rhai", "record(\"x\", 1);\nmissing\n");
    let (code, _, messages) = said(&test, &["seal", "a.rhai"]);
    assert_eq!(code, 1);
    assert!(
        messages.starts_with("error: `a.rhai` records nothing, so there is nothing to seal"),
        "{messages}"
    );
    let (code, _, messages) = said(&test, &["seal", "b.rhai"]);
    assert!(code == 1 && messages.contains("there is no variable `missing`"), "{messages}");
    assert_eq!(
        (text(&test, "a.rhai"), text(&test, "b.rhai")),
        ("print(1);".into(), "record(\"x\", 1);\nmissing\n".into())
    );
    let (code, _, messages) = said(&test, &["run", "--sealed", "a.rhai"]);
    assert!(code == 1 && messages.contains("`a.rhai` is not sealed"), "{messages}");
}

#[test]
fn a_file_is_sealed_with_its_arguments() {
    let script = "let waters = read_samples(args[\"file\"]);\nrecord(\"pH\", waters[0].equilibrate().pH);\n";
    let test = Test::new().file("a.rhai", script).file("spring.csv", DATA);
    assert_eq!(said(&test, &["seal", "a.rhai", "file=spring.csv"]).0, 0);
    let (code, results, messages) = said(&test, &["verify", "a.rhai"]);
    assert_eq!((code, results.as_str()), (0, "a.rhai: 1 value as sealed\n"), "{messages}");
    assert_eq!(said(&test, &["run", "--sealed", "a.rhai"]).0, 0);
}

#[test]
fn a_changed_uncertainty_or_source_is_named() {
    let test = spring();
    assert_eq!(said(&test, &["seal", "spring.rhai"]).0, 0);
    let sealed = text(&test, "spring.rhai");
    let start = sealed.find("name = \"calcite\"").expect("the constant");
    let with = |key: &str, new: &str| {
        let at = start + sealed[start..].find(&format!("{key} = ")).expect("the key") + key.len() + 3;
        let end =
            at + sealed[at..].find(" }").expect("the row's end").min(sealed[at..].find(", ").expect("a key"));
        resealed(&format!("{}{new}{}", &sealed[..at], &sealed[end..]))
    };
    write(&test, "spring.rhai", &with("sigma", "0.05"));
    let (code, results, messages) = said(&test, &["verify", "spring.rhai"]);
    assert!(code == 1 && results.contains("calcite (its uncertainty is"), "{results}{messages}");
    // A source moves nothing, and is said.
    write(
        &test,
        "spring.rhai",
        &resealed(&sealed.replace("(1982) The solubilities", "(1983) The solubilities")),
    );
    let (code, results, messages) = said(&test, &["verify", "spring.rhai"]);
    assert!(code == 0 && results.contains("(its source)"), "{results}{messages}");
}

/// A ledger of one's own that shares constants with a shipped one still joins the sealed one.
#[test]
fn a_ledger_beside_the_script_is_sealed_by_its_digest() {
    let book = |log_k: &str| {
        format!(
            "name = \"my book\"\n[[from]]\nfile = \"plummer1982\"\n[[constant]]\nname = \"my mineral\"\n\
             reaction = \"CaCO3(my mineral) <=> Ca^2+ + CO3^2-\"\nlog_k = {log_k}\nsource = \"notebook\"\n\
             provenance = \"stated\"\n"
        )
    };
    let script = "let own = ledger(\"freshwater\").merge(load_ledger(\"book.toml\"));\n\
                  let spring = sample(#{ pH: 7.4, alkalinity: \"4.9 meq/L\", Ca: \"92 mg/L\" });\n\
                  record(\"calcite\", spring.equilibrate().SI(\"calcite\"));\n\
                  record(\"mine\", spring.equilibrate(own).SI(\"my mineral\"));\n";
    let test = Test::new().file("a.rhai", script).file("book.toml", &book("-8.2"));
    assert_eq!(said(&test, &["seal", "a.rhai"]).0, 0);
    let (code, results, messages) = said(&test, &["verify", "a.rhai"]);
    assert_eq!((code, results.as_str()), (0, "a.rhai: 2 values as sealed\n"), "{messages}");
    write(&test, "book.toml", &book("-8.3"));
    let (code, results, messages) = said(&test, &["verify", "a.rhai"]);
    assert!(
        code == 1 && results.contains("the file `book.toml` that it reads has changed"),
        "{results}{messages}"
    );
    assert!(results.contains("1 of 2 values moved") && results.contains("the changed file"), "{results}");
}

#[test]
fn a_label_is_recorded_once() {
    let test = Test::new().file("a.rhai", "record(\"x\", 1);\nrecord(\"x\", 2);\n");
    let (code, _, messages) = said(&test, &["run", "a.rhai"]);
    assert!(code == 1 && messages.starts_with("error: `x` is recorded twice\n  a.rhai:2:"), "{messages}");
}

#[test]
fn a_report_stands_alone() {
    let test = spring();
    let (code, results, messages) = said(&test, &["report", "spring.rhai", "-o", "spring.html"]);
    assert_eq!((code, results.as_str(), messages.as_str()), (0, "", "wrote spring.html\n"));
    let page = text(&test, "spring.html");
    for part in [
        "<title>A spring</title>",
        "<strong>saturation</strong>",
        "Recorded values",
        "Sources of the constants used",
        "Plummer",
        "Cautions",
        "licensed practice",
        "digest",
    ] {
        assert!(page.contains(part), "{part}");
    }
    for outside in ["<script", "src=", "@import", "url(", "<link", "<iframe"] {
        assert!(!page.contains(outside), "{outside}");
    }
    // It is made again, but no other file is replaced.
    assert_eq!(said(&test, &["report", "spring.rhai", "-o", "spring.html"]).0, 0);
    assert_eq!(text(&test, "spring.html"), page, "the same run gives the same bytes");
    write(&test, "notes.html", "mine");
    let (code, _, messages) = said(&test, &["report", "spring.rhai", "-o", "notes.html"]);
    assert!(code == 1 && messages.contains("is no report of this program"), "{messages}");
    assert_eq!(text(&test, "notes.html"), "mine");
    assert_eq!(said(&test, &["report", "spring.rhai", "-o", "spring.md"]).0, 0);
    let markdown = text(&test, "spring.md");
    assert!(
        markdown.starts_with("# A spring\n")
            && markdown.contains("```rhai")
            && markdown.contains("## Cautions"),
        "{markdown}"
    );
    assert_eq!(said(&test, &["report", "spring.rhai", "-o", "spring.pdf"]).0, 1);
}

#[test]
fn a_report_of_a_failing_script_says_where_it_ended() {
    let test = Test::new().file("a.rhai", "print(1);\nmissing\n");
    let (code, _, messages) = said(&test, &["report", "a.rhai"]);
    assert!(code == 1 && messages.contains("there is no variable `missing`"), "{messages}");
    let page = text(&test, "a.html");
    assert!(
        page.contains("did not come to its end") && page.contains("there is no variable `missing`"),
        "{page}"
    );
}

#[test]
fn plots_are_drawn_and_saved() {
    let script = "let t = table(#{ \"depth [m]\": [0, 10, 20], pH: [8.1, 7.9, 7.8] });\nlet p = t.plot(\"depth\", [\"pH\"]);\nprint(p);\np.save(\"a.svg\");\n";
    let test = Test::new()
        .file("a.rhai", script)
        .file("b.rhai", "table(#{ a: [1, 2], b: [1, 2] }).plot(\"a\", [\"b\"]).save(\"a.gif\");");
    let (code, results, messages) = said(&test, &["run", "--plain", "a.rhai"]);
    assert_eq!(code, 0, "{messages}");
    assert!(results.contains("depth [m]") && results.contains('*') && results.is_ascii(), "{results}");
    assert!(text(&test, "out/a.svg").starts_with("<svg "));
    let (code, _, messages) = said(&test, &["run", "b.rhai"]);
    assert!(code == 1 && messages.contains("end the name in `.svg`"), "{messages}");
}

#[cfg(unix)]
#[test]
fn a_folder_that_cannot_be_written_to_leaves_the_file() {
    use std::os::unix::fs::PermissionsExt;

    let test = Test::new().file("d/a.rhai", "record(\"x\", 1);\n");
    let folder = test.path().join("d");
    let may =
        |mode: u32| std::fs::set_permissions(&folder, std::fs::Permissions::from_mode(mode)).expect("ours");
    may(0o555);
    // Whoever may write everywhere, may write here too.
    let refused = std::fs::write(folder.join("probe"), "").is_err();
    let (code, _, messages) = said(&test, &["seal", "d/a.rhai"]);
    let after = text(&test, "d/a.rhai");
    may(0o755);
    if refused {
        assert!(
            code == 1
                && messages.contains("cannot write `d/a.rhai`")
                && messages.contains("the file is as it was"),
            "{messages}"
        );
        assert_eq!(after, "record(\"x\", 1);\n");
    } else {
        assert_eq!(code, 0, "{messages}");
    }
}

/// A limit on the size of files stands for a full disk: what is written fails half way.
#[cfg(target_os = "linux")]
#[test]
fn a_full_disk_leaves_the_files() {
    let test = spring();
    said(&test, &["report", "spring.rhai", "-o", "spring.html"]);
    let page = text(&test, "spring.html");
    let program = test.lysocline(&[]).get_program().to_string_lossy().into_owned();
    for (command, message) in [
        ("seal spring.rhai", "cannot write `spring.rhai`"),
        ("report spring.rhai -o spring.html", "cannot write `spring.html`"),
    ] {
        let limited = format!("trap '' XFSZ; ulimit -f 1; exec {program} {command}");
        let output = std::process::Command::new("bash")
            .args(["-c", &limited])
            .current_dir(test.path())
            .output()
            .expect("bash");
        let messages = String::from_utf8_lossy(&output.stderr);
        assert!(output.status.code() == Some(1) && messages.contains(message), "{messages}");
    }
    assert_eq!(text(&test, "spring.rhai"), SCRIPT);
    assert_eq!(text(&test, "spring.html"), page);
}

#[test]
fn check_finds_without_running() {
    let script = "print(\"ran\");\nlet lake = sample(#{ ph: 8.1 });\nlet x = lak.pH;\nlet r = reaction(\"H2O <=> H^+\");\nfmtt(1, \".2f\");\n\
                  let state = lake.equilibrate();\nprint(state.get(\"SI(calcit)\"));\nprint(state.get(\"Sl(calcite)\"));\n\
                  let t = table(#{ \"SI (mean)\": [1] });\nprint(t.column(\"SI (mean)\"));\nprint(t.column(\"depth [fathom]\"));\n";
    let test = Test::new().file("a.rhai", script).file("good.rhai", SCRIPT).file("spring.csv", DATA);
    let (code, results, messages) = said(&test, &["check", "a.rhai"]);
    assert_eq!((code, results.as_str()), (1, ""));
    for part in [
        "unknown key `ph`",
        "did you mean `pH`?",
        "a.rhai:2:",
        "there is no variable `lak`",
        "did you mean `lake`?",
        "a.rhai:4:",
        "there is no function `fmtt`",
        "no shipped ledger knows a mineral or gas `calcit`",
        "did you mean `calcite`?",
        "no observable `Sl(calcite)`",
    ] {
        assert!(messages.contains(part), "{part}\n{messages}");
    }
    assert!(!messages.contains("SI (mean)") && !messages.contains("fathom"), "{messages}");
    assert_eq!(said(&test, &["check", "good.rhai"]), (0, String::new(), String::new()));
}

#[test]
fn arguments_by_name() {
    let test = Test::new()
        .file("a.rhai", "print(args[\"file\"]);\nprint(args.get(\"depth\", 5));\n")
        .file("b.rhai", "print(args[\"file\"]);");
    let (code, results, messages) = said(&test, &["run", "a.rhai", "file=north basin.csv"]);
    assert_eq!((code, results.as_str()), (0, "north basin.csv\n5\n"), "{messages}");
    let (code, _, messages) = said(&test, &["run", "b.rhai", "fiel=x"]);
    assert!(
        code == 1 && messages.contains("no argument `file` was given") && messages.contains("write `file=…`"),
        "{messages}"
    );
}

#[test]
fn what_other_programs_read() {
    let test = Test::new();
    let (code, completions, _) = said(&test, &["completions", "bash"]);
    assert!(code == 0 && completions.contains("verify") && completions.contains("--memory-limit"));
    let (code, page, _) = said(&test, &["manual"]);
    assert!(code == 0 && page.contains(".TH lysocline") && page.contains("LYSOCLINE VERIFY"), "{page}");
    let (code, definitions, _) = said(&test, &["definitions"]);
    assert!(
        code == 0 && definitions.contains("fn bjerrum(") && definitions.contains("/// "),
        "{definitions}"
    );
}

#[test]
fn shipped_modules_are_found_and_not_replaced() {
    let script = "import \"stdlib/water-works\" as works;\nimport \"stdlib/calcifiers\" as calcifiers;\n\
                  let tap = sample(#{ pH: 7.6, alkalinity: \"4 meq/L\", Ca: \"80 mg/L\", Cl: \"35.453 mg/L\" });\n\
                  let state = tap.equilibrate();\nprint(works::indices([state]).row(0)[\"class\"]);\n\
                  expect(\"Larson ratio\", works::larson_ratio(state), 0.25, 0.001);\n\
                  let sea = seawater(#{ salinity: 35, pH: 8.05, alkalinity: \"2300 umol/kg\" }).equilibrate();\n\
                  print(calcifiers::saturation(sea).len);\n";
    let test = Test::new().file("a.rhai", script).file("b.rhai", "import \"stdlib/calcifier\" as c;\n");
    let (code, results, messages) = said(&test, &["run", "a.rhai"]);
    assert_eq!((code, results.as_str()), (0, "very hard\n7\n"), "{messages}");
    let (code, _, messages) = said(&test, &["run", "b.rhai"]);
    assert!(code == 1 && messages.contains("did you mean `stdlib/calcifiers`?"), "{messages}");
    std::fs::create_dir(test.path().join("stdlib")).expect("a folder");
    write(&test, "stdlib/calcifiers.rhai", "fn saturation(state) { 1 }\n");
    let (code, _, messages) = said(&test, &["run", "a.rhai"]);
    assert!(code == 1 && messages.contains("is a shipped module and a file beside the script"), "{messages}");
}
