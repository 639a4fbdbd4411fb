//! Pictures: their pixels are where they should be.

use shotwright::blur::Blur;
use shotwright::geom::{Figure, Point, Rect, Repetition, Ring};
use shotwright::report::figure_plot::{Contour, FigurePicture};
use shotwright::report::overview_plot::{Mark, Overview, OverviewFigure};
use shotwright::report::{figure_plot, overview_plot};
use shotwright::shot::ShotList;
use shotwright::target::Target;
use shotwright::units::Nm;

use super::{address, at, shot};

/// A frame of 200 nm × 100 nm with a hole of 80 nm × 40 nm in the middle.
fn frame() -> Figure {
    let ring = |p: [[i64; 2]; 4]| Ring::new(p.map(|[x, y]| Point::from_nm(x, y)).to_vec()).unwrap();
    Figure::new(
        ring([[0, 0], [200, 0], [200, 100], [0, 100]]),
        vec![ring([[60, 30], [140, 30], [140, 70], [60, 70]])],
    )
}

/// Whether a colour fills most of a 5 × 5 block of pixels: text or a line may cross it, a wrong place may not pass.
fn mostly(image: &image::RgbImage, x: u32, y: u32, color: [u8; 3]) -> bool {
    let block = (0..25).map(|i| image.get_pixel(x + i % 5 - 2, y + i / 5 - 2).0);
    block.filter(|p| *p == color).count() > 15
}

#[test]
fn a_figure_picture_shows_the_figure_where_it_is() {
    let dir = tempfile::tempdir().unwrap();
    let figure = frame();
    let target = Target::new(&figure, Blur::new(Nm(5.0)).unwrap(), Nm(1.0));
    let shots = ShotList::new(address(1.0), Vec::new());
    let picture = FigurePicture {
        title: "figure 1",
        figure: &figure,
        target: &target,
        context: &[],
        shots: &shots,
        contours: &[],
        edge_error: &[],
    };
    let path = dir.path().join("figure.png");
    picture.png(&path).unwrap();
    let empty = image::open(&path).unwrap().to_rgb8();
    assert_eq!(empty.dimensions(), figure_plot::SIZE);
    let fill = figure_plot::TARGET_FILL;
    // The figure's box, found in the picture by its fill, must have the figure's aspect and its hole in the middle.
    let filled = |(_, _, p): &(u32, u32, &image::Rgb<u8>)| p.0 == fill;
    // The legend, at the right, has the fill too; the grey rims of letters are not four pixels wide.
    let wide = |x: u32, y: u32| (1..4).all(|i| empty.get_pixel(x + i, y).0 == fill);
    let pixels = || {
        empty
            .enumerate_pixels()
            .filter(filled)
            .filter(|&(x, y, _)| x < 940 && wide(x, y))
    };
    let (x0, x1) = (
        pixels().map(|p| p.0).min().unwrap(),
        pixels().map(|p| p.0).max().unwrap(),
    );
    let (y0, y1) = (
        pixels().map(|p| p.1).min().unwrap(),
        pixels().map(|p| p.1).max().unwrap(),
    );
    let aspect = f64::from(x1 - x0) / f64::from(y1 - y0);
    assert!((aspect - 2.0).abs() < 0.02, "aspect {aspect}");
    assert!(x1 - x0 > 600, "the figure is {} pixels wide", x1 - x0);
    let (mid_x, mid_y) = (u32::midpoint(x0, x1), u32::midpoint(y0, y1));
    assert!(mostly(&empty, mid_x, mid_y, [255; 3]), "the hole is white");
    assert!(
        mostly(&empty, x0 + (x1 - x0) / 8, mid_y, fill),
        "left of the hole"
    );
    assert!(!mostly(&empty, x0 - 12, mid_y, fill), "left of the figure");

    // One shot on the left part: the fill changes there and not at the right.
    let shots = ShotList::new(address(1.0), vec![shot(0, 0, 60, 100, 1.0)]);
    let line = [vec![[0.0, 0.0], [200.0, 0.0]]];
    let contours = [Contour {
        label: "dose as written",
        lines: &line,
    }; 3];
    let error: Vec<(f64, Option<f64>)> = (0..=840)
        .map(|i| (f64::from(i), (i % 100 > 10).then_some(0.5)))
        .collect();
    let picture = FigurePicture {
        shots: &shots,
        contours: &contours,
        edge_error: &error,
        ..picture
    };
    picture.png(&path).unwrap();
    let shot = image::open(&path).unwrap().to_rgb8();
    assert!(!mostly(&shot, x0 + (x1 - x0) / 8, mid_y, fill));
    assert!(mostly(&shot, x1 - (x1 - x0) / 8, mid_y, fill));

    let svg = dir.path().join("figure.svg");
    picture.svg(&svg).unwrap();
    let svg = std::fs::read_to_string(svg).unwrap();
    assert!(svg.starts_with("<svg") && svg.trim_end().ends_with("</svg>"));
    assert!(svg.contains("edge error, nm") && svg.contains("dose as written"));
}

#[test]
fn the_overview_shows_figures_at_their_places_and_boxes_for_many() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("overview.png");
    let (square, once) = (Figure::from_rect(nm_rect(0, 0, 100, 100)), Repetition::Once);
    let many = Repetition::Lattice {
        columns: 1_000_000,
        rows: 1_000_000,
        a: Point::new(400, 0),
        b: Point::new(0, 400),
    };
    let figures = [
        OverviewFigure {
            figure: &square,
            places: vec![(at(0, 0), &once)],
            value: None,
        },
        OverviewFigure {
            figure: &square,
            places: vec![(at(500_000, 500_000), &many)],
            value: Some(4.0),
        },
    ];
    let marks = [Mark {
        number: 1,
        place: Point::from_nm(400_550, 550),
    }];
    let overview = Overview {
        title: "mask",
        value_label: "shots per figure",
        figures: &figures[..1],
        marks: &[],
        extent: nm_rect(0, 0, 100, 200),
    };
    overview.png(&path).unwrap();
    let picture = image::open(&path).unwrap().to_rgb8();
    assert_eq!(picture.dimensions(), overview_plot::SIZE);
    // The square fills the lower half of the extent: grey (no value) below the middle, white above.
    let column = 16 + (overview_plot::SIZE.0 - 190 - 32) / 2;
    assert!(mostly(&picture, column, 800, [190; 3]));
    assert!(mostly(&picture, column, 300, [255; 3]));

    // 10¹² places: one box, so it is drawn at once.
    let whole = Overview {
        figures: &figures,
        marks: &marks,
        extent: nm_rect(0, 0, 400_600, 400_600),
        ..overview
    };
    whole.png(&path).unwrap();
    let picture = image::open(&path).unwrap().to_rgb8();
    assert!(!mostly(&picture, column, 500, [255; 3]));
}

fn nm_rect(x0: i64, y0: i64, x1: i64, y1: i64) -> Rect {
    Rect::new(Point::from_nm(x0, y0), Point::from_nm(x1, y1))
}
