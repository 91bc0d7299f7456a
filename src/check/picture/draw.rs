//! What pictures are made of: a square panel in the base's own frame and units, x up and y to the left.

use std::fmt::Write as _;

/// Height of a line of words.
const LINE: f64 = 18.0;

/// A square panel, its middle at the origin of the base frame.
pub(super) struct Panel {
    side: f64,
    scale: f64,
    half: f64,
    out: String,
    words: String,
    lines: u32,
}

impl Panel {
    /// A panel that shows from -half to half on both axes.
    pub(super) fn new(side: f64, half: f64) -> Self {
        let scale = side / (2.0 * half.max(1e-9));
        Self { side, scale, half, out: String::new(), words: String::new(), lines: 0 }
    }

    fn at(&self, (x, y): (f64, f64)) -> (f64, f64) {
        (self.side / 2.0 - y * self.scale, self.side / 2.0 - x * self.scale)
    }

    /// A line between two points.
    pub(super) fn line(&mut self, from: (f64, f64), to: (f64, f64), colour: &str, width: f64) {
        let ((x1, y1), (x2, y2)) = (self.at(from), self.at(to));
        let _ = writeln!(
            self.out,
            "<line x1=\"{x1:.2}\" y1=\"{y1:.2}\" x2=\"{x2:.2}\" y2=\"{y2:.2}\" stroke=\"{colour}\" stroke-width=\"{width}\" \
             stroke-linecap=\"round\"/>"
        );
    }

    /// A line with a head at its end.
    pub(super) fn arrow(&mut self, from: (f64, f64), to: (f64, f64), colour: &str, width: f64) {
        self.line(from, to, colour, width);
        let ((x1, y1), (x2, y2)) = (self.at(from), self.at(to));
        let length = libm::hypot(x2 - x1, y2 - y1).max(1e-9);
        let (dx, dy) = ((x2 - x1) / length, (y2 - y1) / length);
        let size = 3.0 + 1.8 * width;
        let tip = (x2 + dx * size * 0.6, y2 + dy * size * 0.6);
        let back = (x2 - dx * size * 0.6, y2 - dy * size * 0.6);
        let across = (-dy * size * 0.5, dx * size * 0.5);
        let _ = writeln!(
            self.out,
            "<polygon points=\"{:.2},{:.2} {:.2},{:.2} {:.2},{:.2}\" fill=\"{colour}\"/>",
            tip.0,
            tip.1,
            back.0 + across.0,
            back.1 + across.1,
            back.0 - across.0,
            back.1 - across.1
        );
    }

    /// A rectangle of (length, width) with round corners.
    pub(super) fn rectangle(
        &mut self,
        middle: (f64, f64),
        (length, width): (f64, f64),
        round: f64,
        style: &str,
    ) {
        let (x, y) = self.at(middle);
        let (w, h, r) = (width * self.scale, length * self.scale, round * self.scale);
        let _ = writeln!(
            self.out,
            "<rect x=\"{:.2}\" y=\"{:.2}\" width=\"{w:.2}\" height=\"{h:.2}\" rx=\"{r:.2}\" {style}/>",
            x - w / 2.0,
            y - h / 2.0
        );
    }

    /// A rectangle whose length lies along an angle.
    pub(super) fn turned_rectangle(
        &mut self,
        middle: (f64, f64),
        (length, width): (f64, f64),
        angle_rad: f64,
        style: &str,
    ) {
        let (s, c) = (libm::sin(angle_rad), libm::cos(angle_rad));
        let corners = [(0.5, 0.5), (0.5, -0.5), (-0.5, -0.5), (-0.5, 0.5)].map(|(a, b)| {
            let (along, across) = (a * length, b * width);
            [middle.0 + along * c - across * s, middle.1 + along * s + across * c]
        });
        self.polygon(&corners, style);
    }

    /// A rectangle of (length, width), grown by a distance: what is within that distance of it.
    pub(super) fn grown(&mut self, (length, width): (f64, f64), by: f64, style: &str) {
        self.rectangle((0.0, 0.0), (length + 2.0 * by, width + 2.0 * by), by, style);
    }

    /// A closed polygon.
    pub(super) fn polygon(&mut self, corners: &[[f64; 2]], style: &str) {
        let points: Vec<String> = corners
            .iter()
            .map(|[x, y]| {
                let (x, y) = self.at((*x, *y));
                format!("{x:.2},{y:.2}")
            })
            .collect();
        let _ = writeln!(self.out, "<polygon points=\"{}\" {style}/>", points.join(" "));
    }

    /// A circle round the middle.
    pub(super) fn circle(&mut self, radius: f64, style: &str) {
        let (x, y) = self.at((0.0, 0.0));
        let _ = writeln!(
            self.out,
            "<circle cx=\"{x:.2}\" cy=\"{y:.2}\" r=\"{:.2}\" {style}/>",
            radius * self.scale
        );
    }

    /// Pale circles at round distances, with their figure, and the axes.
    pub(super) fn rings(&mut self) {
        let half = self.half;
        self.line((-half, 0.0), (half, 0.0), "#e2ddd0", 1.0);
        self.line((0.0, -half), (0.0, half), "#e2ddd0", 1.0);
        let step = round_step(half / 3.0);
        let count = (half / step) as u32;
        for ring in 1..=count {
            let radius = f64::from(ring) * step;
            self.circle(radius, "fill=\"none\" stroke=\"#e2ddd0\"");
            self.text(
                (-half * 0.012, -radius),
                "middle",
                10.0,
                "#8a8a8a",
                &format!("{}", round_figure(radius)),
            );
        }
    }

    /// Words at a point.
    pub(super) fn text(&mut self, at: (f64, f64), anchor: &str, size: f64, colour: &str, words: &str) {
        let (x, y) = self.at(at);
        let _ = writeln!(
            self.out,
            "<text x=\"{x:.2}\" y=\"{:.2}\" text-anchor=\"{anchor}\" font-size=\"{size}\" fill=\"{colour}\">{}</text>",
            y + size * 0.35,
            escaped(words)
        );
    }

    /// A line of words below the panel, with a patch of its colour.
    pub(super) fn below(&mut self, colour: &str, words: &str) {
        self.lines += 1;
        let y = self.side + 4.0 + f64::from(self.lines) * LINE;
        let _ = writeln!(
            self.words,
            "<rect x=\"0\" y=\"{:.1}\" width=\"14\" height=\"4\" fill=\"{colour}\"/>",
            y - 6.0
        );
        self.words += &label(20.0, y, 12.0, "#2d2d2d", words);
    }

    /// What the words below take.
    pub(super) fn words_height(&self) -> f64 {
        f64::from(self.lines) * LINE
    }

    /// The panel as a group with its corner at a point of the picture; what stands out is cut off.
    pub(super) fn placed(&self, x: f64, y: f64) -> String {
        let Self { side, out, words, .. } = self;
        format!(
            "<g transform=\"translate({x},{y})\">\n<svg width=\"{side}\" height=\"{side}\" viewBox=\"0 0 {side} {side}\">\n\
             <rect width=\"{side}\" height=\"{side}\" fill=\"#ffffff\"/>\n{out}</svg>\n\
             <rect width=\"{side}\" height=\"{side}\" fill=\"none\" stroke=\"#cfc9ba\"/>\n{words}</g>\n"
        )
    }
}

/// Words at a point of the picture.
pub(super) fn label(x: f64, y: f64, size: f64, colour: &str, words: &str) -> String {
    format!(
        "<text x=\"{x:.1}\" y=\"{y:.1}\" font-size=\"{size}\" fill=\"{colour}\">{}</text>\n",
        escaped(words)
    )
}

/// For XML.
pub(super) fn escaped(text: &str) -> String {
    text.replace('&', "&amp;").replace('<', "&lt;").replace('>', "&gt;").replace('"', "&quot;")
}

/// 1, 2 or 5 times a power of ten, at least `least`.
fn round_step(least: f64) -> f64 {
    let power = libm::pow(10.0, libm::floor(libm::log10(least.max(1e-9))));
    [1.0, 2.0, 5.0, 10.0]
        .into_iter()
        .map(|it| it * power)
        .find(|it| *it >= least * (1.0 - 1e-9))
        .unwrap_or(power)
}

/// Without the digits that multiplying leaves behind.
fn round_figure(value: f64) -> f64 {
    libm::round(value * 1e6) / 1e6
}
