//! Axes, lines and bars as SVG text.
//!
//! Colours come from classes of the page's style sheet, so that one figure
//! serves light, dark and print; lines differ in dashes and markers as well as
//! in colour. Numbers are printed with few digits, which keeps pages small.
//!
//! Not here: what is drawn.

use crate::review::numbers::short;

/// Room left of the axes for labels.
const LEFT: f64 = 78.0;
/// Room right of the axes.
const RIGHT: f64 = 16.0;
/// Room above the axes.
const TOP: f64 = 14.0;
/// Room below the axes.
const BOTTOM: f64 = 46.0;

/// Text for HTML and SVG.
#[must_use]
pub fn escape(text: &str) -> String {
    let mut out = String::with_capacity(text.len());
    for c in text.chars() {
        match c {
            '&' => out.push_str("&amp;"),
            '<' => out.push_str("&lt;"),
            '>' => out.push_str("&gt;"),
            '"' => out.push_str("&quot;"),
            '\'' => out.push_str("&#39;"),
            c if c.is_control() => out.push(' '),
            c => out.push(c),
        }
    }
    out
}

/// A coordinate of the drawing, to a hundredth.
fn at(value: f64) -> String {
    let text = format!("{value:.2}");
    text.trim_end_matches('0').trim_end_matches('.').to_owned()
}

/// Round tick values inside `[low, high]`, about `wanted` of them.
#[must_use]
pub fn ticks(low: f64, high: f64, wanted: u32) -> Vec<f64> {
    let span = high - low;
    if !span.is_finite() || span <= 0.0 {
        return vec![low];
    }
    let rough = span / f64::from(wanted.max(1));
    let decade = libm::pow(10.0, libm::floor(libm::log10(rough)));
    let step = [1.0, 2.0, 5.0, 10.0]
        .into_iter()
        .map(|m| m * decade)
        .find(|step| *step >= rough)
        .unwrap_or(10.0 * decade);
    let first = libm::ceil(low / step - 1e-9);
    (0..64_u32)
        .map(|k| (first + f64::from(k)) * step)
        .take_while(|value| *value <= high + 1e-9 * step)
        .map(|value| if value.abs() < 1e-9 * step { 0.0 } else { value })
        .collect()
}

/// Labels of ticks: the same number of decimals for all.
fn labels(values: &[f64]) -> Vec<String> {
    for digits in 1..=12 {
        let texts: Vec<String> = values.iter().map(|&v| short(v, digits)).collect();
        let exact = values.iter().zip(&texts).all(|(&value, text)| {
            text.parse::<f64>().is_ok_and(|read| (read - value).abs() <= 1e-6 * span(values))
        });
        if exact {
            return texts;
        }
    }
    values.iter().map(|&v| short(v, 12)).collect()
}

fn span(values: &[f64]) -> f64 {
    match (values.first(), values.last()) {
        (Some(first), Some(last)) if last > first => last - first,
        _ => 1.0,
    }
}

/// Smallest interval that holds all finite values, widened by `margin` of its length.
#[must_use]
pub fn extent(values: impl Iterator<Item = f64>, margin: f64) -> (f64, f64) {
    let (mut low, mut high) = (f64::INFINITY, f64::NEG_INFINITY);
    for value in values.filter(|v| v.is_finite()) {
        low = low.min(value);
        high = high.max(value);
    }
    if low > high {
        return (0.0, 1.0);
    }
    let room = if high > low { margin * (high - low) } else { 0.5 * high.abs().max(1e-300) };
    (low - room, high + room)
}

/// One figure with linear axes.
pub struct Figure {
    width: f64,
    height: f64,
    x: (f64, f64),
    y: (f64, f64),
    body: String,
}

impl Figure {
    /// Empty axes of the given ranges.
    #[must_use]
    pub fn new(width: f64, height: f64, x: (f64, f64), y: (f64, f64)) -> Self {
        Self { width, height, x, y, body: String::new() }
    }

    fn px(&self, x: f64) -> f64 {
        LEFT + (x - self.x.0) / (self.x.1 - self.x.0) * (self.width - LEFT - RIGHT)
    }

    fn py(&self, y: f64) -> f64 {
        self.height - BOTTOM - (y - self.y.0) / (self.y.1 - self.y.0) * (self.height - TOP - BOTTOM)
    }

    fn clamped_py(&self, y: f64) -> f64 {
        self.py(y).clamp(TOP - 2.0, self.height - BOTTOM + 2.0)
    }

    /// A shaded rectangle.
    pub fn area(&mut self, class: &str, x: (f64, f64), y: (f64, f64)) {
        let (left, right) = (self.px(x.0.max(self.x.0)), self.px(x.1.min(self.x.1)));
        let (top, bottom) = (self.clamped_py(y.1), self.clamped_py(y.0));
        self.body.push_str(&format!(
            "<rect class=\"{class}\" x=\"{}\" y=\"{}\" width=\"{}\" height=\"{}\"/>\n",
            at(left),
            at(top),
            at((right - left).max(0.0)),
            at((bottom - top).max(0.0))
        ));
    }

    /// A line through points.
    pub fn line(&mut self, class: &str, points: impl Iterator<Item = (f64, f64)>) {
        let mut path = String::new();
        for (x, y) in points.filter(|(x, y)| x.is_finite() && y.is_finite()) {
            let letter = if path.is_empty() { 'M' } else { 'L' };
            path.push_str(&format!("{letter}{} {}", at(self.px(x)), at(self.clamped_py(y))));
        }
        self.body.push_str(&format!("<path class=\"{class}\" d=\"{path}\"/>\n"));
    }

    /// A circle at every point.
    pub fn markers(&mut self, class: &str, points: impl Iterator<Item = (f64, f64)>) {
        for (x, y) in points.filter(|(x, y)| x.is_finite() && y.is_finite()) {
            self.body.push_str(&format!(
                "<circle class=\"{class}\" cx=\"{}\" cy=\"{}\" r=\"3.5\"/>\n",
                at(self.px(x)),
                at(self.clamped_py(y))
            ));
        }
    }

    /// A vertical line over the whole height with a label at its top.
    pub fn upright(&mut self, class: &str, x: f64, label: &str, right: bool) {
        let px = self.px(x);
        let (top, bottom) = (TOP, self.height - BOTTOM);
        // The label of the right end stands lower, so that those of a short range do not meet.
        let (shift, anchor, drop) = if right { (-5.0, "end", 27.0) } else { (5.0, "start", 12.0) };
        self.body.push_str(&format!(
            "<path class=\"{class}\" d=\"M{0} {1}L{0} {2}\"/>\n<text class=\"note\" x=\"{3}\" y=\"{4}\" \
             text-anchor=\"{anchor}\">{5}</text>\n",
            at(px),
            at(top),
            at(bottom),
            at(px + shift),
            at(top + drop),
            escape(label)
        ));
    }

    /// Text at a point.
    pub fn text(&mut self, x: f64, y: f64, anchor: &str, label: &str) {
        self.body.push_str(&format!(
            "<text class=\"note\" x=\"{}\" y=\"{}\" text-anchor=\"{anchor}\">{}</text>\n",
            at(self.px(x)),
            at(self.clamped_py(y) - 4.0),
            escape(label)
        ));
    }

    /// The finished figure with axes and an alternative text.
    #[must_use]
    pub fn finish(self, id: &str, title: &str, x_label: &str, y_label: &str) -> String {
        let (left, right) = (LEFT, self.width - RIGHT);
        let (top, bottom) = (TOP, self.height - BOTTOM);
        let mut axes = String::new();
        let x_ticks = ticks(self.x.0, self.x.1, 7);
        for (value, label) in x_ticks.iter().zip(labels(&x_ticks)) {
            let px = self.px(*value);
            axes.push_str(&format!(
                "<path class=\"grid\" d=\"M{0} {1}L{0} {2}\"/><text class=\"tick\" x=\"{0}\" y=\"{3}\" \
                 text-anchor=\"middle\">{label}</text>\n",
                at(px),
                at(top),
                at(bottom),
                at(bottom + 16.0)
            ));
        }
        let y_ticks = ticks(self.y.0, self.y.1, 5);
        for (value, label) in y_ticks.iter().zip(labels(&y_ticks)) {
            let py = self.py(*value);
            axes.push_str(&format!(
                "<path class=\"grid\" d=\"M{0} {1}L{2} {1}\"/><text class=\"tick\" x=\"{3}\" y=\"{4}\" \
                 text-anchor=\"end\">{label}</text>\n",
                at(left),
                at(py),
                at(right),
                at(left - 6.0),
                at(py + 4.0)
            ));
        }
        axes.push_str(&format!(
            "<rect class=\"frame\" x=\"{}\" y=\"{}\" width=\"{}\" height=\"{}\"/>\n",
            at(left),
            at(top),
            at(right - left),
            at(bottom - top)
        ));
        axes.push_str(&format!(
            "<text class=\"axis\" x=\"{}\" y=\"{}\" text-anchor=\"middle\">{}</text>\n<text class=\"axis\" \
             transform=\"translate(14 {}) rotate(-90)\" text-anchor=\"middle\">{}</text>\n",
            at(0.5 * (left + right)),
            at(self.height - 8.0),
            escape(x_label),
            at(0.5 * (top + bottom)),
            escape(y_label)
        ));
        wrap(id, title, self.width, self.height, &format!("{axes}{}", self.body))
    }
}

fn wrap(id: &str, title: &str, width: f64, height: f64, body: &str) -> String {
    let id = escape(id);
    format!(
        "<svg viewBox=\"0 0 {} {}\" role=\"img\" aria-labelledby=\"{id}\"><title id=\"{id}\">{}</title>\n{body}</svg>",
        at(width),
        at(height),
        escape(title)
    )
}

/// One bar: label, length from 0 to 1, text behind it.
pub struct Bar {
    /// Left of the bar.
    pub label: String,
    /// Share of the whole width; negative bars are drawn hollow.
    pub length: f64,
    /// Right of the bar.
    pub value: String,
}

/// Horizontal bars; `mark` draws a line across all at a share of the width.
#[must_use]
pub fn bars(id: &str, title: &str, width: f64, list: &[Bar], mark: Option<(f64, &str)>) -> String {
    const ROW: f64 = 26.0;
    const LABELS: f64 = 170.0;
    const VALUES: f64 = 120.0;
    let room = width - LABELS - VALUES;
    let head = if mark.is_some() { 20.0 } else { 6.0 };
    let height = head + ROW * list.len() as f64 + 6.0;
    let mut body = String::new();
    if let Some((share, label)) = mark {
        let x = LABELS + share.clamp(0.0, 1.0) * room;
        body.push_str(&format!(
            "<path class=\"limit\" d=\"M{0} 16L{0} {1}\"/><text class=\"note\" x=\"{0}\" y=\"12\" \
             text-anchor=\"middle\">{2}</text>\n",
            at(x),
            at(height - 4.0),
            escape(label)
        ));
    }
    for (idx, bar) in list.iter().enumerate() {
        let y = head + ROW * idx as f64;
        let length = bar.length.abs().clamp(0.0, 1.0) * room;
        let class = if bar.length < 0.0 { "bar negative" } else { "bar" };
        body.push_str(&format!(
            "<text class=\"tick\" x=\"{0}\" y=\"{1}\" text-anchor=\"end\">{2}</text>\
             <rect class=\"{class}\" x=\"{3}\" y=\"{4}\" width=\"{5}\" height=\"16\"/>\
             <text class=\"tick\" x=\"{6}\" y=\"{1}\">{7}</text>\n",
            at(LABELS - 8.0),
            at(y + 15.0),
            escape(&bar.label),
            at(LABELS),
            at(y + 3.0),
            at(length.max(1.0)),
            at(LABELS + length.max(1.0) + 6.0),
            escape(&bar.value),
        ));
    }
    wrap(id, title, width, height, &body)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn ticks_are_round_and_inside() {
        assert_eq!(ticks(-60.0, 60.0, 6), [-60.0, -40.0, -20.0, 0.0, 20.0, 40.0, 60.0]);
        assert_eq!(ticks(0.0, 1.0, 5), [0.0, 0.2, 0.4, 0.600_000_000_000_000_1, 0.8, 1.0]);
        assert_eq!(ticks(3.0, 3.0, 5), [3.0]);
        assert_eq!(labels(&ticks(0.0, 1.0, 5))[3], "0.6");
    }

    #[test]
    fn text_of_a_spec_cannot_leave_its_place() {
        let figure = Figure::new(400.0, 200.0, (0.0, 1.0), (0.0, 1.0));
        let svg = figure.finish("a", "</title><script>", "x\"<", "&");
        assert!(!svg.contains("<script>"));
        assert!(svg.contains("&lt;script&gt;"));
    }

    #[test]
    fn extents_survive_what_is_not_a_number() {
        assert_eq!(extent([1.0, f64::NAN, 3.0].into_iter(), 0.5), (0.0, 4.0));
        assert_eq!(extent(std::iter::empty(), 0.1), (0.0, 1.0));
        let (low, high) = extent([2.0].into_iter(), 0.1);
        assert!(low < 2.0 && high > 2.0);
    }
}
