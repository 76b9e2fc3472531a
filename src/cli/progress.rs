//! A line on standard error that says how far long work has come.

use std::io::IsTerminal;
use std::time::Duration;

use indicatif::{ProgressBar, ProgressStyle};

/// Shows `task` and its share done while `work` goes on; only on a terminal.
pub(super) fn during<T>(task: &'static str, work: impl FnOnce(&mut dyn FnMut(f64)) -> T) -> T {
    if !std::io::stderr().is_terminal() {
        return work(&mut |_| {});
    }
    let bar = ProgressBar::new(1000).with_message(task);
    let style = ProgressStyle::with_template("{msg:>12}  {bar:40}  {percent:>3} %  {eta} left");
    bar.set_style(style.expect("the template is a valid one"));
    bar.enable_steady_tick(Duration::from_millis(200));
    let outcome = work(&mut |share| bar.set_position((share.clamp(0.0, 1.0) * 1000.0) as u64));
    bar.finish_and_clear();
    outcome
}
