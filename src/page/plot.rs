//! Lines over time as SVG.

use plotters::prelude::*;

/// One line.
#[derive(Clone, Debug)]
pub struct PlotLine<'a> {
    /// What it shows, with its unit.
    pub name: &'a str,
    /// Its colour: red, green, blue.
    pub colour: (u8, u8, u8),
    /// Points in order of x.
    pub points: Vec<(f64, f64)>,
}

/// A plot: lines, and marks at moments.
#[derive(Clone, Debug)]
pub struct Plot<'a> {
    /// Name of the x axis, with its unit.
    pub x: &'a str,
    /// Name of the y axis, with its unit.
    pub y: &'a str,
    /// What is drawn.
    pub lines: Vec<PlotLine<'a>>,
    /// Upright marks: where, what, colour.
    pub marks: Vec<(f64, &'a str, (u8, u8, u8))>,
}

const SIZE: (u32, u32) = (900, 260);

impl Plot<'_> {
    /// As SVG; an empty one where there is nothing to draw.
    #[must_use]
    pub fn svg(&self) -> String {
        let mut svg = String::new();
        // Drawing into a String fails only for want of points, and then leaves what is there.
        let _ = self.draw(&mut svg);
        svg
    }

    fn draw(&self, svg: &mut String) -> Result<(), Box<dyn std::error::Error>> {
        let marks = self.marks.iter().map(|it| it.0);
        let xs = || self.lines.iter().flat_map(|it| &it.points).map(|it| it.0).chain(marks.clone());
        let ys = || self.lines.iter().flat_map(|it| &it.points).map(|it| it.1);
        let (x0, x1) = (xs().fold(f64::INFINITY, f64::min), xs().fold(f64::NEG_INFINITY, f64::max));
        let (y0, y1) = (ys().fold(0.0, f64::min), ys().fold(0.0, f64::max));
        if x1 <= x0 {
            return Ok(());
        }
        let room = ((y1 - y0) * 0.08).max(1e-6);
        let area = SVGBackend::with_string(svg, SIZE).into_drawing_area();
        let mut chart = ChartBuilder::on(&area)
            .margin(8)
            .x_label_area_size(34)
            .y_label_area_size(56)
            .build_cartesian_2d(x0..x1, (y0 - room)..(y1 + 2.0 * room))?;
        chart
            .configure_mesh()
            .light_line_style(TRANSPARENT)
            .bold_line_style(BLACK.mix(0.12))
            .x_desc(self.x)
            .y_desc(self.y)
            .draw()?;
        for line in &self.lines {
            let colour = rgb(line.colour);
            let series = LineSeries::new(line.points.iter().copied(), colour.stroke_width(2));
            chart
                .draw_series(series)?
                .label(line.name)
                .legend(move |(x, y)| PathElement::new([(x, y), (x + 18, y)], colour.stroke_width(2)));
        }
        for (at, what, colour) in &self.marks {
            let colour = rgb(*colour);
            let upright =
                PathElement::new([(*at, y0 - room), (*at, y1 + 2.0 * room)], colour.stroke_width(1));
            chart.draw_series([upright])?.label(*what).legend(move |(x, y)| {
                PathElement::new([(x + 9, y - 5), (x + 9, y + 5)], colour.stroke_width(1))
            });
        }
        chart
            .configure_series_labels()
            .position(SeriesLabelPosition::UpperRight)
            .background_style(WHITE.mix(0.85))
            .draw()?;
        area.present()?;
        Ok(())
    }
}

fn rgb((red, green, blue): (u8, u8, u8)) -> RGBColor {
    RGBColor(red, green, blue)
}
