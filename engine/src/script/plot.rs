//! `Plot` in scripts: drawings of tables and runs, and the diagrams of the trade.

use rhai::plugin::*;
use rhai::{Array, Dynamic, ImmutableString, Map};

use super::faults::advised;
use super::named::named;
use super::show::Style;
use super::{Fail, Host, ScriptResult, Vocabulary, fail};
use crate::nearest::nearest;
use crate::present::plot::{Options, Plot, PlotError, Scale};
use crate::present::{Cell, Column, Table, plot_svg};
use crate::process::diagram::{self, Diagram, DiagramError, Span};
use crate::process::{Run, RunError, equivalence_points};
use crate::solve::Settings;
use crate::water::{Sample, Treatment};

/// Registers the type.
pub(super) fn register(vocabulary: &mut Vocabulary) {
    vocabulary
        .module(rhai::exported_module!(plot_functions))
        .pure(&["plot", "bjerrum", "predominance", "titled"])
        .native::<Plot>("Plot", show);
}

/// In one line, where nothing can draw it.
fn show(plot: &Plot, _: &Style) -> String {
    format!("plot of {}; `.save(\"name.svg\")` writes it", plot.description())
}

impl From<PlotError> for Fail {
    fn from(error: PlotError) -> Self {
        match error {
            PlotError::Table(error) => error.into(),
            other => advised(&other.to_string()),
        }
    }
}

impl From<DiagramError> for Fail {
    fn from(error: DiagramError) -> Self {
        match error {
            DiagramError::Sweep(error) => error.into(),
            DiagramError::Equilibrium(error) => error.into(),
            other => advised(&other.to_string()),
        }
    }
}

fn texts(titles: &Array) -> Result<Vec<String>, Fail> {
    let text = |item: &Dynamic| {
        let text = item.read_lock::<ImmutableString>().map(|text| text.to_string());
        text.ok_or_else(|| fail("the columns to draw are a list of titles: `[\"pH\"]`").argument(1))
    };
    titles.iter().map(text).collect()
}

fn options(map: &Map) -> Result<Options, Fail> {
    let mut given = named(map)?;
    let mut scale = |key: &str| -> Result<Option<Scale>, Fail> {
        let Some(word) = given.text(key).map_err(Fail::from)? else { return Ok(None) };
        let scale = Scale::parse(&word).ok_or_else(|| {
            fail(format!("unknown scale `{word}`")).help("write \"linear\" or \"log\"").key(key)
        });
        scale.map(Some)
    };
    let (x_scale, y_scale) = (scale("x_scale")?, scale("y_scale")?);
    let title = given.text("title").map_err(Fail::from)?;
    given.finish().map_err(Fail::from)?;
    Ok(Options { title, x_scale, y_scale })
}

fn of_table(table: &Table, x: &str, ys: &Array, options: &Options) -> ScriptResult<Plot> {
    let titles = texts(ys)?;
    let titles: Vec<&str> = titles.iter().map(String::as_str).collect();
    Ok(Plot::of_table(table, x, &titles, options).map_err(Fail::from)?)
}

/// A run is drawn with its uncertainties where it has them.
fn of_run(run: &Run, x: &str, ys: &Array, options: &Options) -> ScriptResult<Plot> {
    let mut asked = vec![x.to_owned()];
    asked.extend(texts(ys)?);
    let table = run.table_with_sigma(&asked).map_err(|error: RunError| Fail::from(error))?;
    // A table spells out units; its columns stand in the order asked for.
    let titles: Vec<String> = table.titles().map(ToString::to_string).collect();
    let drawn = &titles[titles.len().saturating_sub(asked.len())..];
    let ys: Vec<&str> = drawn[1..].iter().map(String::as_str).collect();
    let mut plot = Plot::of_table(&table, &drawn[0], &ys, options).map_err(Fail::from)?;
    mark_equivalence(&mut plot, run, &drawn[0]);
    Ok(plot)
}

/// The equivalence points of a titration, on its curve of pH against volume; none where they cannot be told.
fn mark_equivalence(plot: &mut Plot, run: &Run, x: &str) {
    let over_volume = run.axes().first().is_some_and(|axis| axis.title().to_string() == x);
    if !(over_volume && plot.shows("pH")) {
        return;
    }
    let Ok(points) = equivalence_points(run, &Settings::default()) else { return };
    let values = |title: &str| points.column(title).map(numbers_in).unwrap_or_default();
    plot.mark("pH", "equivalence point", values(x).into_iter().zip(values("pH")));
}

fn numbers_in(column: &Column) -> Vec<f64> {
    column.cells().iter().filter_map(Cell::value).collect()
}

/// `#{ pH: [4, 10], points: 61 }` for the axes named.
fn spans(map: Map, diagram: &mut Diagram) -> Result<(), Fail> {
    let number = |value: &Dynamic| value.as_float().ok().or_else(|| value.as_int().ok().map(|n| n as f64));
    let known: Vec<String> =
        diagram.axes().map(|axis| axis.title.clone()).chain(["points".to_owned()]).collect();
    for (key, value) in &map {
        if key.as_str() == "points" {
            let points =
                value.as_int().ok().and_then(|n| usize::try_from(n).ok()).filter(|n| (2..=400).contains(n));
            diagram.points =
                points.ok_or_else(|| fail("`points` is a whole number from 2 to 400").key("points"))?;
            continue;
        }
        let near =
            nearest(key, known.iter().map(String::as_str)).map(|near| format!("did you mean `{near}`?"));
        let span = diagram
            .axis_mut(key)
            .ok_or_else(|| fail(format!("unknown key `{key}`")).maybe_help(near).key(key.to_string()))?;
        let ends = value.read_lock::<Array>().map(|ends| ends.iter().filter_map(number).collect::<Vec<_>>());
        let wrong = || fail(format!("`{key}` takes its two ends, such as `[4, 10]`")).key(key.to_string());
        match ends.as_deref() {
            Some([from, to]) if from < to => (span.from, span.to) = (*from, *to),
            _ => return Err(wrong()),
        }
    }
    Ok(())
}

/// The solids that options allow, and the rest of the options.
fn split_solids(mut options: Map) -> Result<(Vec<String>, Map), Fail> {
    let wrong = || fail("`solids` takes a list of names: `[\"calcite\"]`").key("solids");
    let Some(given) = options.remove("solids") else { return Ok((vec![], options)) };
    let names = given.into_array().map_err(|_| wrong())?;
    let names = names.into_iter().map(|name| name.into_string().map_err(|_| wrong()));
    Ok((names.collect::<Result<_, _>>()?, options))
}

fn allowing(sample: &Sample, solids: &[String]) -> Result<Sample, Fail> {
    solids.iter().try_fold(sample.clone(), |sample, solid| {
        super::sample::known(&sample, solid)?;
        let allow = Treatment::Allow { solid: solid.clone(), above: 0.0 };
        sample.treated(allow).map_err(|error| Fail::from(error).key("solids"))
    })
}

fn settings(host: &Host) -> Settings {
    Settings { stop: Some(host.stop().flag()), ..Settings::default() }
}

fn drawn(context: &NativeCallContext, sample: &Sample, diagram: &Diagram) -> ScriptResult<Plot> {
    let host = Host::of(context);
    let total = diagram.n_states() as u64;
    let plot = diagram::draw(sample, diagram, &settings(&host), &|done| {
        host.progress("diagram", done as u64, total);
    });
    host.stop().check()?;
    Ok(plot.map_err(Fail::from)?)
}

fn span(title: &str) -> Result<Span, Fail> {
    Span::usual(title).ok_or_else(|| {
        fail(format!("`{title}` has no usual range"))
            .help(format!("give its ends: `predominance(sample, y, x, \"Fe\", #{{ \"{title}\": [0, 1] }})`"))
    })
}

/// Drawings.
#[export_module]
mod plot_functions {
    use super::*;

    /// A plot of columns of the table against one of them. Columns of one unit share a panel; points in rising or falling
    /// order are joined by lines. An axis whose numbers grow by one ratio, or span three powers of ten, is logarithmic.
    ///
    /// ```rhai
    /// table(#{ "depth [m]": [0, 10, 20], pH: [8.1, 7.9, 7.8] }).plot("depth", ["pH"])
    /// ```
    #[rhai_fn(name = "plot", return_raw, pure)]
    pub fn plot_table(table: &mut Table, x: &str, columns: Array) -> ScriptResult<Plot> {
        of_table(table, x, &columns, &Options::default())
    }
    /// The same with options: `#{ title: "the lake", x_scale: "log", y_scale: "linear" }`.
    ///
    /// ```rhai
    /// table(#{ "depth [m]": [0, 10, 20], pH: [8.1, 7.9, 7.8] }).plot("depth", ["pH"], #{ title: "the lake" })
    /// ```
    #[rhai_fn(name = "plot", return_raw, pure)]
    pub fn plot_table_with(table: &mut Table, x: &str, columns: Array, options: Map) -> ScriptResult<Plot> {
        of_table(table, x, &columns, &super::options(&options)?)
    }
    /// A plot of observables of a run against one of them, with bands of one standard uncertainty where it is known. The pH of
    /// a titration against its volume has the equivalence points marked.
    ///
    /// ```rhai
    /// let lake = sample(#{ pH: "8.1 +/- 0.02", alkalinity: "2.3 +/- 0.05 meq/L", Ca: "41 mg/L" });
    /// sweep(lake, #{ temperature: [5, 15, 25] }).plot("temperature", ["SI(calcite)"])
    /// ```
    #[rhai_fn(name = "plot", return_raw, pure)]
    pub fn plot_run(run: &mut Run, x: &str, observables: Array) -> ScriptResult<Plot> {
        of_run(run, x, &observables, &Options::default())
    }
    /// The same with options: `title`, `x_scale`, `y_scale`.
    #[rhai_fn(name = "plot", return_raw, pure)]
    pub fn plot_run_with(run: &mut Run, x: &str, observables: Array, options: Map) -> ScriptResult<Plot> {
        of_run(run, x, &observables, &super::options(&options)?)
    }

    /// How carbon is spread over its species as pH is changed, total carbon kept: log10 of each molality, with those of
    /// H^+ and OH^-.
    ///
    /// ```rhai
    /// bjerrum(sample(#{ pH: 8.1, DIC: "2 mmol/kg" }), "C", #{ points: 9 })
    /// ```
    #[rhai_fn(name = "bjerrum", return_raw)]
    pub fn bjerrum_carbon(context: NativeCallContext, sample: Sample) -> ScriptResult<Plot> {
        drawn(&context, &sample, &Diagram::bjerrum("C"))
    }
    /// The same for another element: `bjerrum(water, "P")`.
    #[rhai_fn(name = "bjerrum", return_raw)]
    pub fn bjerrum_of(context: NativeCallContext, sample: Sample, element: &str) -> ScriptResult<Plot> {
        drawn(&context, &sample, &Diagram::bjerrum(element))
    }
    /// The same with options: `#{ pH: [4, 10], points: 61 }`.
    #[rhai_fn(name = "bjerrum", return_raw)]
    pub fn bjerrum_with(
        context: NativeCallContext,
        sample: Sample,
        element: &str,
        options: Map,
    ) -> ScriptResult<Plot> {
        let mut diagram = Diagram::bjerrum(element);
        spans(options, &mut diagram)?;
        drawn(&context, &sample, &diagram)
    }

    /// Which species or mineral holds most of an element, over two axes that a sweep can set: upwards first, then
    /// across.
    ///
    /// ```rhai
    /// let water = sample(#{ pH: 8, alkalinity: "2 meq/L", Ca: "40 mg/L" });
    /// predominance(water, "temperature", "pH", "C", #{ points: 3, pH: [5, 11] })
    /// ```
    #[rhai_fn(name = "predominance", return_raw)]
    pub fn predominance_over(
        context: NativeCallContext,
        sample: Sample,
        up: &str,
        across: &str,
        element: &str,
    ) -> ScriptResult<Plot> {
        drawn(&context, &sample, &Diagram::predominance(span(up)?, span(across)?, element))
    }
    /// The same with options: the ends of the axes, the number of points along each and the solids that may form,
    /// `#{ pH: [4, 10], points: 61, solids: ["ferrihydrite"] }`. Over pe and pH the limits of water are drawn as well.
    ///
    /// ```rhai
    /// let water = sample(#{ pH: 7, Fe: "10 umol/kg" });
    /// predominance(water, "pe", "pH", "Fe", #{ points: 3, solids: ["ferrihydrite"] })
    /// ```
    #[rhai_fn(name = "predominance", return_raw)]
    pub fn predominance_with(
        context: NativeCallContext,
        sample: Sample,
        up: &str,
        across: &str,
        element: &str,
        options: Map,
    ) -> ScriptResult<Plot> {
        // An axis without a usual range has its ends in the options.
        let ends = |title: &str| Span { title: title.to_owned(), from: 0.0, to: 1.0 };
        let span = |title: &str| match options.contains_key(title) {
            true => Ok(Span::usual(title).unwrap_or_else(|| ends(title))),
            false => super::span(title),
        };
        let mut diagram = Diagram::predominance(span(up)?, span(across)?, element);
        let (solids, spans) = split_solids(options)?;
        super::spans(spans, &mut diagram)?;
        drawn(&context, &allowing(&sample, &solids)?, &diagram)
    }

    /// The same plot under a title.
    ///
    /// ```rhai
    /// table(#{ "depth [m]": [0, 10, 20], pH: [8.1, 7.9, 7.8] }).plot("depth", ["pH"]).titled("the lake")
    /// ```
    #[rhai_fn(pure)]
    pub fn titled(plot: &mut Plot, title: &str) -> Plot {
        Plot { title: Some(title.to_owned()), ..plot.clone() }
    }

    /// Draws the plot.
    ///
    /// ```rhai
    /// table(#{ "depth [m]": [0, 10, 20], pH: [8.1, 7.9, 7.8] }).plot("depth", ["pH"]).show()
    /// ```
    #[rhai_fn(name = "show", pure)]
    pub fn show_plot(context: NativeCallContext, plot: &mut Plot) {
        Host::of(&context).display(&Dynamic::from(plot.clone()));
    }

    /// Writes the plot to a file in the output folder: `.svg`, which browsers and word processors show, or `.png` where the
    /// program was built with the feature `png`.
    ///
    /// ```rhai
    /// table(#{ "depth [m]": [0, 10, 20], pH: [8.1, 7.9, 7.8] }).plot("depth", ["pH"]).save("lake.svg")
    /// ```
    #[rhai_fn(name = "save", return_raw, pure)]
    pub fn save_plot(context: NativeCallContext, plot: &mut Plot, file: &str) -> ScriptResult<()> {
        let host = Host::of(&context);
        let bytes = bytes_for(file, plot)?;
        let path = host.files().write(file, &bytes).map_err(|error| Fail::from(error).argument(0))?;
        host.message(&format!("wrote {}", path.display()));
        Ok(())
    }
}

fn bytes_for(file: &str, plot: &Plot) -> Result<Vec<u8>, Fail> {
    let ending = std::path::Path::new(file).extension().map(|ending| ending.to_string_lossy().to_lowercase());
    match ending.as_deref() {
        Some("svg") => Ok(plot_svg::standalone(plot).into_bytes()),
        Some("png") => picture(plot),
        _ => Err(fail(format!("cannot tell the kind of `{file}`"))
            .help("end the name in `.svg` or `.png`")
            .argument(0)),
    }
}

#[cfg(feature = "png")]
fn picture(plot: &Plot) -> Result<Vec<u8>, Fail> {
    crate::present::plot_png::bytes(plot).map_err(|error| fail(error.to_string()))
}

#[cfg(not(feature = "png"))]
fn picture(_: &Plot) -> Result<Vec<u8>, Fail> {
    Err(fail("this lysocline was built without the feature `png`, so it writes plots as SVG only")
        .help("end the name in `.svg`, or build it with `--features png`")
        .argument(0))
}
