//! Progress bars, on a terminal only.

use std::sync::Mutex;
use std::time::Duration;

use indicatif::{ProgressBar, ProgressStyle};

use trodden::diag::Observer;

/// Shows one bar at a time, with the time left where the number of steps is known.
pub struct Bars {
    shown: bool,
    bar: Mutex<Option<ProgressBar>>,
}

impl Bars {
    pub fn new(shown: bool) -> Self {
        Self { shown, bar: Mutex::new(None) }
    }

    fn with(&self, act: impl FnOnce(&mut Option<ProgressBar>)) {
        act(&mut self.bar.lock().unwrap_or_else(std::sync::PoisonError::into_inner));
    }
}

impl Observer for Bars {
    fn begin(&self, stage: &str, total: Option<u64>) {
        if !self.shown {
            return;
        }
        let bar = match total {
            Some(total) => {
                ProgressBar::new(total).with_style(style("{msg:32} [{bar:28}] {percent:>3} %  {eta} left"))
            }
            None => ProgressBar::new_spinner().with_style(style("{msg:32} {spinner} {elapsed}")),
        };
        bar.set_message(stage.to_owned());
        bar.enable_steady_tick(Duration::from_millis(150));
        self.with(|slot| {
            if let Some(old) = slot.replace(bar) {
                old.finish_and_clear();
            }
        });
    }

    fn advance(&self, steps: u64) {
        self.with(|slot| {
            if let Some(bar) = slot {
                bar.inc(steps);
            }
        });
    }

    fn end(&self) {
        self.with(|slot| {
            if let Some(bar) = slot.take() {
                bar.finish_and_clear();
            }
        });
    }
}

fn style(template: &str) -> ProgressStyle {
    ProgressStyle::with_template(template).expect("the template is well formed").progress_chars("=> ")
}
