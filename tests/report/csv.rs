//! Shot lists and figures as CSV: exact, in both directions, and refused with the place.

use shotwright::geom::{Orientation, Point, Repetition, Transform};
use shotwright::quote::result::{
    ByMethod, Count, EdgeError, FigureFracture, FigureResult, FlagKind,
};
use shotwright::report::shots_csv::{Rows, ShotWriter};
use shotwright::report::{figures_csv, shots_csv};
use shotwright::shot::{AddressUnit, ShotList};
use shotwright::units::Nm;

use super::{address, at, shot};

fn written(shots: &ShotList, places: &[(Transform, Repetition)], rows: Rows) -> String {
    let mut writer = ShotWriter::new(Vec::new(), rows).unwrap();
    let places = places.iter().map(|(t, r)| (*t, r));
    writer.figure(3, shots, places).unwrap();
    String::from_utf8(writer.finish().unwrap()).unwrap()
}

#[test]
fn shots_are_written_exact_to_the_picometre() {
    let shots = ShotList::new(
        address(0.05),
        vec![shot(-1, 0, 200, 30, 1.0), shot(0, 40, 1, 60, 0.85)],
    );
    assert_eq!(
        written(&shots, &[(at(0, 0), Repetition::Once)], Rows::Placed),
        "figure,place,x_nm,y_nm,w_nm,h_nm,dose\n\
         3,0,-0.05,0,10.05,1.5,1\n\
         3,0,0,2,0.05,1,0.85\n"
    );
    let fine = ShotList::new(
        AddressUnit::FINEST,
        vec![shot(-1_000_001, 7, 20, 1_000_000_007, 1.0)],
    );
    assert!(
        written(&fine, &[(at(0, 0), Repetition::Once)], Rows::Placed)
            .ends_with("\n3,0,-1000.001,0.007,1000.021,1000000,1\n")
    );
}

#[test]
fn every_place_gets_a_line_and_distinct_only_the_first() {
    let shots = ShotList::new(address(1.0), vec![shot(0, 0, 10, 4, 1.0)]);
    let lattice = Repetition::Lattice {
        columns: 2,
        rows: 1,
        a: Point::from_nm(100, 0),
        b: Point::from_nm(0, 0),
    };
    let turned = Transform {
        orientation: Orientation::all()
            .into_iter()
            .find(|o| o.apply(Point::new(1, 0)) == Point::new(0, 1) && !o.mirrors())
            .unwrap(),
        shift: Point::from_nm(0, 50),
    };
    let places = [(at(5_000, 0), lattice), (turned, Repetition::Once)];
    // By hand: a quarter turn takes [0,10]×[0,4] to [−4,0]×[0,10], then up by 50.
    assert_eq!(
        written(&shots, &places, Rows::Placed),
        "figure,place,x_nm,y_nm,w_nm,h_nm,dose\n3,0,5,0,10,4,1\n3,1,105,0,10,4,1\n3,2,-4,50,4,10,1\n"
    );
    assert_eq!(
        written(&shots, &places, Rows::Distinct),
        "figure,place,x_nm,y_nm,w_nm,h_nm,dose\n3,0,5,0,10,4,1\n"
    );
}

proptest::proptest! {
    #[test]
    fn csv_round_trips(
        unit in proptest::sample::select(vec![1_i64, 50, 100, 250, 1000]),
        sides in proptest::collection::vec((-1_000_000_000_i64..1_000_000_000, -1_000_000_i64..1_000_000, 1_i64..5000, 1_i64..5000, 1e-3_f64..3.0), 1..40),
    ) {
        let grid = AddressUnit::new(Nm::from_pm(unit)).unwrap();
        let shots = sides.iter().map(|&(x, y, w, h, d)| shot(x, y, x + w, y + h, d)).collect();
        let shots = ShotList::new(grid, shots);
        let csv = written(&shots, &[(at(0, 0), Repetition::Once)], Rows::Placed);
        let read = shots_csv::read(csv.as_bytes(), grid).unwrap();
        proptest::prop_assert_eq!(&read.shots, &shots);
        proptest::prop_assert!(read.notes.is_empty());
    }
}

#[test]
fn columns_may_come_in_any_order_and_dose_is_optional() {
    let csv = "\u{feff}h_nm, w_nm ,area,y_nm,x_nm\r\n4,10,40,-2,1e1\r\n";
    let read = shots_csv::read(csv.as_bytes(), address(1.0)).unwrap();
    assert_eq!(
        read.shots,
        ShotList::new(address(1.0), vec![shot(10, -2, 20, 2, 1.0)])
    );
    assert_eq!(
        read.notes,
        [
            "column `area` is not used",
            "no column `dose`: every shot has dose 1"
        ]
    );
}

#[test]
fn sides_off_the_grid_keep_their_place_on_a_finer_one() {
    let csv = "x_nm,y_nm,w_nm,h_nm,dose\n0.5,0,10,10,1\n";
    let read = shots_csv::read(csv.as_bytes(), address(1.0)).unwrap();
    assert_eq!(read.shots.address(), AddressUnit::FINEST);
    assert_eq!(read.shots.shots(), [shot(500, 0, 10_500, 10_000, 1.0)]);
    assert!(read.notes.is_empty());

    let csv = "x_nm,y_nm,w_nm,h_nm,dose\n0.0004,0,10,10,1\n";
    let read = shots_csv::read(csv.as_bytes(), address(1.0)).unwrap();
    assert_eq!(
        read.notes,
        ["shots with a side off the 0.001 nm grid, rounded to it: 1"]
    );
}

#[test]
fn a_header_alone_is_an_empty_list() {
    let read = shots_csv::read("x_nm,y_nm,w_nm,h_nm,dose\n".as_bytes(), address(1.0)).unwrap();
    assert!(read.shots.is_empty());
}

#[test]
fn bad_shots_are_refused_with_line_column_found_and_expected() {
    let long = "a finite number of nanometres within ±4.5 km";
    let side = "a side of 0.001 nm or more, in nanometres";
    let dose = "a dose above 0, as a multiple of dose-to-size";
    let head = "x_nm,y_nm,w_nm,h_nm,dose\n1,1,1,1,1\n";
    for (csv, said) in [
        (
            format!("{head}nan,0,1,1,1"),
            format!("line 3, column x_nm: found `nan`, expected {long}"),
        ),
        (
            format!("{head}0,inf,1,1,1"),
            format!("line 3, column y_nm: found `inf`, expected {long}"),
        ),
        (
            format!("{head}0,1e13,1,1,1"),
            format!("line 3, column y_nm: found `1e13`, expected {long}"),
        ),
        (
            format!("{head}0,0,0,1,1"),
            format!("line 3, column w_nm: found `0`, expected {side}"),
        ),
        (
            format!("{head}0,0,1,-2,1"),
            format!("line 3, column h_nm: found `-2`, expected {side}"),
        ),
        (
            format!("{head}0,0,1e-7,1,1"),
            format!("line 3, column w_nm: found `1e-7`, expected {side}"),
        ),
        (
            format!("{head}0,0,1,ten,1"),
            format!("line 3, column h_nm: found `ten`, expected {side}"),
        ),
        (
            format!("{head}0,0,1,1,0"),
            format!("line 3, column dose: found `0`, expected {dose}"),
        ),
        (
            format!("{head}\n0,0,1,1,"),
            format!("line 4, column dose: found ``, expected {dose}"),
        ),
        (
            format!("{head}\r\n0,0,1,1\r\n"),
            "line 4: found 4 cells, expected 5 as in line 1".to_owned(),
        ),
        (
            "x,y,w,h\n1,1,1,1\n".to_owned(),
            "line 1: found columns `x,y,w,h`, expected a column `x_nm` among them".to_owned(),
        ),
        (
            "x_nm,y_nm,w_nm,h_nm,x_nm\n".to_owned(),
            "line 1: found column `x_nm` twice, expected it once".to_owned(),
        ),
        (
            String::new(),
            "line 1: found columns ``, expected a column `x_nm` among them".to_owned(),
        ),
    ] {
        let error = shots_csv::read(csv.as_bytes(), address(1.0)).unwrap_err();
        assert_eq!(error.to_string(), said, "for {csv:?}");
    }
}

#[test]
fn figures_csv_has_one_line_per_figure_and_empty_cells() {
    let figure = FigureResult {
        clip: 1,
        figure: 3,
        place_nm: [12.5, -4.0],
        fingerprint: "00112233445566ff".to_owned(),
        places: Count(40),
        outline_nm: 812.25,
        vertices: 96,
        rectilinear: false,
        fractures: ByMethod {
            staircase: None,
            tile: Some(FigureFracture {
                shots: 12,
                edge_error_nm: EdgeError {
                    mean: Some(-0.5),
                    p95: Some(1.5),
                    worst: None,
                },
                prints_within_tolerance: Some(true),
                scores: None,
                mean_dose: Some(1.0625),
                seconds: Some(0.25),
            }),
            overlap: None,
        },
        flags: vec![FlagKind::BrokenOutline, FlagKind::ShotLimitsNotMet],
    };
    let mut out = Vec::new();
    figures_csv::write(&mut out, [&figure]).unwrap();
    assert_eq!(
        String::from_utf8(out).unwrap(),
        "clip,figure,x_nm,y_nm,fingerprint,places,outline_nm,vertices,shape,\
         staircase_shots,staircase_edge_error_mean_nm,staircase_edge_error_p95_nm,staircase_edge_error_worst_nm,staircase_prints_within_tolerance,\
         staircase_corner_error_worst_nm,staircase_margin_median_nm_per_pct,staircase_margin_worst_nm_per_pct,staircase_edge_sd_median_nm,staircase_edge_sd_worst_nm,staircase_narrowest_drawn_nm,staircase_narrowest_printed_nm,staircase_printed_area_nm2,staircase_mean_dose,staircase_seconds,\
         tile_shots,tile_edge_error_mean_nm,tile_edge_error_p95_nm,tile_edge_error_worst_nm,tile_prints_within_tolerance,\
         tile_corner_error_worst_nm,tile_margin_median_nm_per_pct,tile_margin_worst_nm_per_pct,tile_edge_sd_median_nm,tile_edge_sd_worst_nm,tile_narrowest_drawn_nm,tile_narrowest_printed_nm,tile_printed_area_nm2,tile_mean_dose,tile_seconds,\
         overlap_shots,overlap_edge_error_mean_nm,overlap_edge_error_p95_nm,overlap_edge_error_worst_nm,overlap_prints_within_tolerance,\
         overlap_corner_error_worst_nm,overlap_margin_median_nm_per_pct,overlap_margin_worst_nm_per_pct,overlap_edge_sd_median_nm,overlap_edge_sd_worst_nm,overlap_narrowest_drawn_nm,overlap_narrowest_printed_nm,overlap_printed_area_nm2,overlap_mean_dose,overlap_seconds,\
         flags\n\
         1,3,12.5,-4,00112233445566ff,40,812.25,96,curved,,,,,,,,,,,,,,,,12,-0.5,1.5,,true,,,,,,,,,1.0625,0.25,,,,,,,,,,,,,,,,broken_outline shot_limits_not_met\n"
    );
}
