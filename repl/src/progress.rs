//! The progress bar of long native loops: on standard error, on a terminal, after the first second.

use std::io::IsTerminal;
use std::sync::{Arc, Mutex, PoisonError};
use std::time::{Duration, Instant};

use indicatif::{ProgressBar, ProgressStyle};
use lysocline_engine::script::host::{OnProgress, Progress};

const PATIENCE: Duration = Duration::from_secs(1);

/// A report function that draws the bar.
pub fn on_standard_error() -> OnProgress {
    let is_terminal = std::io::stderr().is_terminal();
    let display = Mutex::new(Display::default());
    Arc::new(move |progress| {
        if is_terminal {
            display.lock().unwrap_or_else(PoisonError::into_inner).report(progress);
        }
    })
}

#[derive(Default)]
struct Display {
    started: Option<Instant>,
    bar: Option<ProgressBar>,
}

impl Display {
    fn report(&mut self, progress: Progress<'_>) {
        let started = *self.started.get_or_insert_with(Instant::now);
        if progress.done >= progress.total {
            self.finish();
        } else if started.elapsed() >= PATIENCE {
            self.bar.get_or_insert_with(|| bar(progress)).set_position(progress.done);
        }
    }

    fn finish(&mut self) {
        self.started = None;
        if let Some(bar) = self.bar.take() {
            bar.finish_and_clear();
        }
    }
}

fn bar(progress: Progress<'_>) -> ProgressBar {
    let bar = ProgressBar::new(progress.total);
    if let Ok(style) = ProgressStyle::with_template("{prefix} [{bar:30}] {pos}/{len}, {eta} left") {
        bar.set_style(style.progress_chars("=> "));
    }
    bar.with_prefix(progress.what.to_owned())
}
