//! The report's pictures, as SVG inside the page: [`sequence`], [`histogram`], [`narrowing`].
//!
//! Each takes plain numbers and gives markup; colours, dashes and fonts are in `style.css`. Nothing depends on colour
//! alone: limits are dashed, targets dotted, and every line is labelled. Each picture has a title and a description
//! for readers who cannot see it.

pub mod axis;
pub mod histogram;
pub mod mark;
pub mod narrowing;
pub mod sequence;

use maud::{Markup, Render, html};

/// All pictures are drawn this wide and scale with the page, in SVG user units.
pub const WIDTH: f64 = 880.0;

/// A length or place in SVG user units: two decimals are finer than any screen.
#[derive(Clone, Copy, Debug)]
pub struct Px(pub f64);

impl Render for Px {
    fn render_to(&self, buffer: &mut String) {
        let text = format!("{:.2}", self.0);
        let text = text.trim_end_matches('0').trim_end_matches('.');
        buffer.push_str(if text == "-0" { "0" } else { text });
    }
}

/// The plot's place inside the picture.
#[derive(Clone, Copy, Debug)]
pub struct Frame {
    /// Left edge of the plot.
    pub left: f64,
    /// Right edge.
    pub right: f64,
    /// Upper edge.
    pub top: f64,
    /// Lower edge.
    pub bottom: f64,
}

/// What stands around every picture.
#[derive(Clone, Copy, Debug)]
pub struct Caption<'a> {
    /// Unique in the page: the base of the ids of title, description and clipping.
    pub id: &'a str,
    /// One line: what the picture shows.
    pub title: &'a str,
    /// What one sees in it, in words.
    pub description: &'a str,
}

/// Wraps drawn content in an accessible SVG; what leaves the frame is cut where `clip` is used (see [`clip`]).
fn picture(caption: &Caption<'_>, height: f64, frame: &Frame, content: &Markup) -> Markup {
    let Caption { id, title, description } = caption;
    html! {
        svg viewBox={ "0 0 " (Px(WIDTH)) " " (Px(height)) } role="img"
            aria-labelledby={ (id) "-title " (id) "-description" } {
            title id={ (id) "-title" } { (title) }
            desc id={ (id) "-description" } { (description) }
            defs {
                clipPath id={ (id) "-frame" } {
                    rect x=(Px(frame.left)) y=(Px(frame.top)) width=(Px(frame.right - frame.left))
                        height=(Px(frame.bottom - frame.top)) {}
                }
            }
            (content)
        }
    }
}

/// The value of a `clip-path` attribute that cuts at the frame.
fn clip(id: &str) -> String {
    format!("url(#{id}-frame)")
}

/// A straight line.
fn line(class: &str, from: (f64, f64), to: (f64, f64)) -> Markup {
    html! { line class=(class) x1=(Px(from.0)) y1=(Px(from.1)) x2=(Px(to.0)) y2=(Px(to.1)) {} }
}

/// Text at a place; `anchor` is `start`, `middle` or `end`.
fn text(class: &str, at: (f64, f64), anchor: &str, content: &str) -> Markup {
    html! { text class=(class) x=(Px(at.0)) y=(Px(at.1)) text-anchor=(anchor) { (content) } }
}

/// The path through points, as SVG path data.
fn path(points: impl IntoIterator<Item = (f64, f64)>) -> String {
    let mut data = String::new();
    for (x, y) in points {
        data.push_str(if data.is_empty() { "M" } else { "L" });
        Px(x).render_to(&mut data);
        data.push(' ');
        Px(y).render_to(&mut data);
    }
    data
}

/// Roughly how wide a label is, in user units; the labels' font is 13 units high.
fn label_width(label: &str) -> f64 {
    7.2 * label.chars().count() as f64
}
