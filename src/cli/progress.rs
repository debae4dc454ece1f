//! The progress bar, for a terminal that somebody watches.

use indicatif::{ProgressBar, ProgressDrawTarget, ProgressStyle};

use crate::notebook::Event;

pub(super) struct Progress {
    bar: Option<ProgressBar>,
    watched: bool,
}

impl Progress {
    pub fn new(watched: bool) -> Progress {
        Progress { bar: None, watched }
    }

    pub fn show(&mut self, event: Event) {
        match event {
            Event::Begin { due, .. } if self.watched && due > 0 => {
                let bar = ProgressBar::with_draw_target(Some(due as u64), ProgressDrawTarget::stderr());
                // Without colours, so that there is nothing to switch off.
                if let Ok(style) = ProgressStyle::with_template("[{bar:40}] {pos} of {len} notes  {msg}") {
                    bar.set_style(style.progress_chars("=> "));
                }
                self.bar = Some(bar);
            }
            Event::Begin { .. } => {}
            Event::Done { worksheet } => {
                if let Some(bar) = &self.bar {
                    bar.set_message(worksheet.to_owned());
                    bar.inc(1);
                }
            }
        }
    }
}

impl Drop for Progress {
    fn drop(&mut self) {
        if let Some(bar) = &self.bar {
            bar.finish_and_clear();
        }
    }
}
