//! Tables, rows and columns as scripts use them.

use super::*;

const LAKES: &str = "let t = table([
    #{ name: \"north\", pH: 8.15, \"Ca [mg/L]\": 41.2 },
    #{ name: \"south\", pH: 7.92, \"Ca [mg/L]\": 39.8 },
    #{ name: \"east\", \"Ca [mg/L]\": 50 },
]);\n";

#[track_caller]
fn lakes(script: &str, expected: &str) {
    shows(&format!("{LAKES}{script}"), expected);
}

#[test]
fn drawn() {
    lakes(
        "t",
        "| Ca [mg/L] | name | pH |\n| ---: | --- | ---: |\n| 41.2 | north | 8.15 |\n| 39.8 | south | 7.92 |\n| 50.0 | east | – |",
    );
    lakes("t.row(1)", "| Ca [mg/L] | name | pH |\n| ---: | --- | ---: |\n| 39.8 | south | 7.92 |");
    lakes("t.column(\"pH\")", "| pH |\n| ---: |\n| 8.15 |\n| 7.92 |\n| – |");
}

#[test]
fn columns_keep_the_order_of_pairs() {
    shows("table([[\"pH\", [8.1, 7.9]], [\"Ca [mg/L]\", [41, 39]]]).titles", "[\"pH\", \"Ca [mg/L]\"]");
    lakes("table([t.column(\"name\"), t.column(\"Ca\") * 2]).titles", "[\"name\", \"Ca * 2 [mg/L]\"]");
    shows("table([]).len", "0");
}

#[test]
fn rows_are_chosen_by_closures() {
    lakes("t.where(|row| row[\"pH\"] < 8).column(\"name\").values", "[\"south\"]");
    lakes("t.where(|row| row.is_missing(\"pH\")).column(\"name\").values", "[\"east\"]");
    lakes("let limit = 8; t.where(|row| row.get(\"pH\") > limit).len", "1");
    // A closure works on its own copy of what it captured.
    lakes("let n = 0; let first = t.where(|row| { n += 1; n == 1 }); [first.len, n]", "[3, 0]");
    lakes("let sum = 0; for row in t { sum += row[\"Ca\"]; } sum", "131");
}

#[test]
fn quantities_enter_with_their_uncertainty() {
    let script = "table(#{ \"Ca [mmol/L]\": [quantity(\"1500 +/- 100 umol/L\")] })";
    shows(&format!("{script}.column(\"Ca\").values"), "[1.5]");
    shows(script, "| Ca [mmol/L] |\n| ---: |\n| 1.50 ± 0.10 |");
    fails(
        "table(#{ Ca: [quantity(\"3 mg/L\")] })",
        "the title `Ca` has no unit for a value in `mg/L`",
        &["call the column `Ca [mg/L]`"],
        "Ca",
    );
}

#[test]
fn columns_calculate() {
    lakes("let c = t.column(\"Ca\"); (2 * c + c / 4 - 1.5).values", "[91.2, 88.05, 111]");
    lakes("(1 / t.column(\"Ca\")).unit", "\"1/(mg/L)\"");
    lakes("t.column(\"Ca\").median()", "41.2");
    lakes("[t.column(\"Ca\").min, t.column(\"Ca\").max(), t.column(\"pH\").len]", "[39.8, 50, 3]");
    lakes("t.column(\"Ca\")[-1]", "50");
    lakes("let all = []; for x in t.column(\"pH\") { all.push(x); } all", "[8.15, 7.92, ()]");
    lakes("t.column(\"pH\") == t.column(\"pH\")", "true");
}

#[test]
fn shown_on_the_output() {
    use std::io::Write;
    use std::sync::{Arc, Mutex};

    #[derive(Clone, Default)]
    struct Shared(Arc<Mutex<Vec<u8>>>);
    impl Write for Shared {
        fn write(&mut self, bytes: &[u8]) -> std::io::Result<usize> {
            self.0.lock().unwrap().write(bytes)
        }
        fn flush(&mut self) -> std::io::Result<()> {
            Ok(())
        }
    }

    let output = Shared::default();
    let engine = ScriptEngine::new(Options { output: Box::new(output.clone()), ..Options::default() });
    assert_eq!(echo(&engine, "table(#{ pH: [8.1, 7.9, 7.8] }).show(1)"), "");
    let text = String::from_utf8(output.0.lock().unwrap().clone()).unwrap();
    assert_eq!(text, "| pH |\n| ---: |\n| 8.1 |\nand 2 rows more\n");
}

#[test]
fn saved_in_the_output_folder() {
    let engine = engine();
    echo(&engine, &format!("{LAKES}t.save(\"lakes.csv\"); t.save(\"lakes.json\"); t.save(\"lakes.md\");"));
    let folder = engine.host().files().read_folder().to_owned();
    let text = std::fs::read_to_string(folder.join("lakes.csv")).expect("the file was written");
    assert_eq!(text, "Ca [mg/L],name,pH\n41.2,north,8.15\n39.8,south,7.92\n50,east,\n");
    assert!(folder.join("lakes.json").exists() && folder.join("lakes.md").exists());
    let refused =
        |name: &str| engine.run("test", &format!("{LAKES}t.save(\"{name}\")")).expect_err(name).message;
    assert_eq!(
        refused("lakes.xyz"),
        "`lakes.xyz` has no ending that says how to write a table: `.csv`, `.json` and `.md` are understood"
    );
    assert!(refused("../lakes.csv").starts_with("`../lakes.csv` is outside"));
    std::fs::write(folder.join("other.csv"), "kept").expect("the folder can be written");
    assert!(refused("other.csv").ends_with("exists and was not written by this script"));
}

#[test]
fn messages() {
    let of_lakes = |script: &str, message: &str, help: &[&str], underlined: &str| {
        fails(&format!("{LAKES}{script}"), message, help, underlined);
    };
    of_lakes(
        "t.column(\"PH\")",
        "no column `PH`",
        &["did you mean `pH`?", "the columns are `Ca [mg/L]`, `name` and `pH`"],
        "\"PH\"",
    );
    of_lakes(
        "t.where(|row| row[\"Mg\"] < 8)",
        "no column `Mg`",
        &["the columns are `Ca [mg/L]`, `name` and `pH`"],
        "[",
    );
    of_lakes(
        "t.where(|row| row[\"pH\"])",
        "the closure of `where` must say true or false, not a number",
        &[],
        "|",
    );
    of_lakes(
        "t.column(\"pH\") < 8",
        "cannot compare a Column with a whole number",
        &["to choose rows write `table.where(|row| row[\"pH\"] < 8)`"],
        "<",
    );
    of_lakes(
        "t.column(\"name\").mean",
        "`name` holds text, `north` in row 0: numbers are needed here",
        &[],
        "mean",
    );
    of_lakes(
        "t.column(\"Ca\") + t.column(\"pH\")",
        "`Ca [mg/L]` and `pH` have different units: convert one of them first",
        &[],
        "+",
    );
    of_lakes(
        "t.row(3)",
        "there is no row 3: this table has 3 rows",
        &["they are counted from 0 to 2, or from the end: -1 is the last"],
        "3",
    );
    of_lakes("t.head(-1)", "a number of rows cannot be -1", &[], "-");
    of_lakes(
        "t.sorted_by(\"pH\", \"down\")",
        "unknown order `down`",
        &["write \"ascending\" or \"descending\""],
        "\"down\"",
    );
    of_lakes(
        "t.sorted_by(\"pH\");\n1",
        "the result of `sorted_by` is not used",
        &["write `let name = …` to keep it"],
        "sorted_by",
    );
    of_lakes(
        "t.with_column(\"x\", |row| #{})",
        "`x`: a map cannot stand in a table",
        &["a number, a text, a quantity, true or false, or `()` for a missing value can"],
        "with_column",
    );
    fails("table(#{ pH: 8.1 })", "the column `pH` takes an array of values, not a number", &[], "pH");
    fails("table(#{ pH: [8.1], Ca: [1, 2] })", "`pH` has 1 rows where 2 are needed", &[], "table");
}
