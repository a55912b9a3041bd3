//! What holds for every report.

use chemistry::report::{
    Analyte as A, Method, Qualifier, Reading, Report, ReportLine, SampleKind, TypedValue, Verdict,
    WaterKind, assess,
};
use proptest::prelude::*;

use crate::{HARD_WATER, laboratory};

proptest! {
    #[test]
    fn a_balance_does_not_depend_on_the_units_a_report_is_printed_in(
        seed in prop::collection::vec(0usize..64, HARD_WATER.len()),
    ) {
        let plain = laboratory(&HARD_WATER).balance.unwrap();
        let lines: Vec<_> = HARD_WATER.iter().zip(&seed).map(|((analyte, unit, text), pick)| {
            let reading = Reading::parse(*analyte, *unit, text).unwrap();
            let units = analyte.units();
            let other = units[pick % units.len()];
            let typed = reading.canonical().reported_in(other).unwrap();
            ReportLine { reading: Reading::new(*analyte, other, typed).unwrap(), method: Method::Laboratory }
        }).collect();
        let report = Report::new(lines, SampleKind::SingleSample, WaterKind::Mains, None).unwrap();
        let other = assess(&report);
        let balance = other.balance.unwrap();
        prop_assert!((balance.cations.get() - plain.cations.get()).abs() < 1e-9);
        prop_assert!((balance.anions.get() - plain.anions.get()).abs() < 1e-9);
        prop_assert_eq!(other.verdict, Verdict::AddsUp);
    }

    #[test]
    fn whatever_is_reported_every_figure_is_a_number(
        lines in prop::collection::btree_map(
            prop::sample::select(A::ALL.to_vec()),
            (0usize..64, any::<bool>(), prop_oneof![Just(0.0), 1e-9..14.0_f64, 0.0..1e5_f64]),
            0..A::ALL.len(),
        ),
        average in any::<bool>(),
    ) {
        let lines: Vec<_> = lines.into_iter().filter_map(|(analyte, (pick, below, number))| {
            let qualifier = if below { Qualifier::Below } else { Qualifier::Measured };
            let typed = TypedValue::new(qualifier, number).ok()?;
            let unit = analyte.units()[pick % analyte.units().len()];
            let reading = Reading::new(analyte, unit, typed).ok()?;
            Some(ReportLine { reading, method: Method::Photometer })
        }).collect();
        let kind = if average { SampleKind::Average } else { SampleKind::SingleSample };
        let assessment = assess(&Report::new(lines, kind, WaterKind::Other, None).unwrap());
        for finding in &assessment.findings {
            prop_assert!(finding.figures.iter().all(|f| f.value.is_finite()), "{finding:?}");
            prop_assert!(!finding.sentence.contains("NaN") && !finding.sentence.contains("inf "));
        }
        for inference in &assessment.inferences {
            prop_assert!(inference.figure.best().is_finite() && inference.figure.sd() >= 0.0);
        }
        if let Ok(composition) = assessment.composition(&assessment.inferences) {
            prop_assert!(composition.water.ions.iter().all(|(_, mg)| mg.get().is_finite()));
        }
    }
}
