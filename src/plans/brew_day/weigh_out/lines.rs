//! The lines of a weigh-out as the bench shows them: still to weigh, in, and on paper.

use std::collections::BTreeMap;

use chemistry::material::Form as Kind;
use jiff::civil::Date;

use crate::brewery::Settings;
use crate::db::Db;
use crate::error::{Error, FieldProblem};
use crate::id::{DoseId, MaterialId, MaterialLotId};
use crate::people::Member;
use crate::plans::weigh_out::effect::{Band, Effect, Moved};
use crate::plans::weigh_out::{in_order, lots, needs_second_person};
use crate::plans::{Dose, Plan, words};
use crate::shelf::{self, Material, MaterialLot, USUAL_TOLERANCE};
use crate::web::form::Form;
use crate::web::format;
use crate::web::units::Measure;

/// What a bench needs of plan, shelf and brewery to show lines.
pub(super) struct Bench<'a> {
    pub(super) plan: &'a Plan,
    pub(super) settings: &'a Settings,
    pub(super) typed: &'a Form,
    shelf: BTreeMap<MaterialId, (Material, Vec<MaterialLot>)>,
    today: Date,
}

/// A lot to weigh from.
pub(super) struct LotChoice {
    pub(super) id: MaterialLotId,
    pub(super) code: String,
    /// When it was opened, whether it is weaker, …
    pub(super) note: String,
    /// What speaks against it.
    pub(super) flag: String,
    pub(super) chosen: bool,
}

/// What an amount does that is asked about.
pub(super) struct Asked {
    pub(super) why: String,
    pub(super) figures: Vec<AskedRow>,
}

/// One figure of it.
pub(super) struct AskedRow {
    pub(super) name: String,
    pub(super) before: String,
    pub(super) after: String,
    pub(super) unit: &'static str,
    pub(super) window: String,
    pub(super) stands: &'static str,
    pub(super) stands_words: &'static str,
    pub(super) moves: bool,
}

/// A line that is not in.
pub(super) struct Line {
    pub(super) id: DoseId,
    pub(super) shown: bool,
    /// “Line 2 of 5”.
    pub(super) step_words: String,
    /// “line 1 of 2”, of this vessel.
    pub(super) place: String,
    pub(super) vessel: &'static str,
    pub(super) name: String,
    /// Substance and formula.
    pub(super) what: String,
    /// Form and strength.
    pub(super) strength: String,
    pub(super) amount: String,
    pub(super) unit: &'static str,
    pub(super) step: bool,
    pub(super) cautions: Vec<&'static str>,
    pub(super) lots: Vec<LotChoice>,
    pub(super) lot_typed: String,
    pub(super) actual_typed: String,
    pub(super) reason_typed: String,
    pub(super) second_person: bool,
    pub(super) planned: f64,
    pub(super) tolerance: f64,
    pub(super) asked: Option<Asked>,
    problems: Vec<FieldProblem>,
}

/// A line that is in.
pub(super) struct InLine {
    pub(super) id: DoseId,
    pub(super) vessel: &'static str,
    pub(super) name: String,
    pub(super) amount: String,
    pub(super) unit: &'static str,
    pub(super) planned: String,
    pub(super) as_planned: bool,
    pub(super) left_out: bool,
    pub(super) lot: String,
    pub(super) lot_flag: String,
    pub(super) weighed: String,
    pub(super) witness: String,
    pub(super) reason: String,
    pub(super) corrections: Vec<String>,
    pub(super) times_corrected: usize,
    pub(super) second_person: bool,
}

/// One line in the list of all of them.
pub(super) struct Step {
    pub(super) id: DoseId,
    pub(super) words: String,
    pub(super) state: &'static str,
    pub(super) state_words: &'static str,
}

/// The lines of one vessel, on the screen and on paper.
pub(super) struct Part {
    pub(super) vessel: &'static str,
    pub(super) steps: Vec<Step>,
    pub(super) rows: Vec<PaperRow>,
}

/// One line on paper.
pub(super) struct PaperRow {
    pub(super) name: String,
    pub(super) what: String,
    pub(super) amount: String,
    pub(super) unit: &'static str,
    pub(super) lot: String,
    pub(super) actual: String,
    pub(super) actual_lot: String,
    pub(super) who: String,
    pub(super) time: String,
}

impl Line {
    /// What is wrong with a field of this line.
    pub(super) fn problem(&self, field: &str) -> Option<&str> {
        self.problems
            .iter()
            .find(|problem| problem.field == field)
            .map(|problem| problem.message.as_str())
    }

    /// What is wrong with the reason, but for that there is none.
    pub(super) fn reason_problem(&self) -> Option<&str> {
        self.problem("reason").filter(|_| self.asked.is_none())
    }

    /// What is asked about the lot beside those to pick.
    pub(super) fn lot_label(&self) -> &'static str {
        if self.lots.is_empty() {
            "Lot: scan or type"
        } else {
            "Another: scan or type"
        }
    }

    /// What is wrong with it, but for the question why.
    pub(super) fn mistakes(&self) -> Vec<&FieldProblem> {
        self.problems
            .iter()
            .filter(|problem| problem.field != "reason")
            .collect()
    }
}

impl<'a> Bench<'a> {
    /// Reads what the shelf holds of the plan's materials.
    pub(super) async fn of(
        db: &Db,
        by: &Member,
        plan: &'a Plan,
        settings: &'a Settings,
        typed: &'a Form,
    ) -> Result<Self, Error> {
        let mut held = BTreeMap::new();
        for dose in &plan.doses {
            let Some(id) = plan.inputs.shelf.get(dose.material).and_then(|it| it.id) else {
                continue;
            };
            if held.contains_key(&id) {
                continue;
            }
            let material = shelf::operations::find(db, by, id).await?;
            let lots = shelf::operations::lots(db, by, id).await?;
            held.insert(id, (material, lots));
        }
        Ok(Self {
            plan,
            settings,
            typed,
            shelf: held,
            today: format::today(&settings.time_zone),
        })
    }

    fn held(&self, dose: &Dose) -> Option<&(Material, Vec<MaterialLot>)> {
        self.shelf
            .get(&self.plan.inputs.shelf.get(dose.material)?.id?)
    }

    fn name(&self, dose: &Dose) -> String {
        let item = self.plan.inputs.problem.shelf.get(dose.material);
        item.map_or_else(String::new, |item| item.name.clone())
    }

    fn amount(&self, dose: &Dose, amount: f64) -> (String, &'static str) {
        words::dose(
            self.settings.units,
            &self.plan.inputs,
            dose.material,
            amount,
        )
    }

    /// Substance and formula, then form and strength as the plan took them.
    fn what(&self, dose: &Dose) -> (String, String) {
        let Some(item) = self.plan.inputs.problem.shelf.get(dose.material) else {
            return (String::new(), String::new());
        };
        let substance = item.material.substance();
        let what = if item.name == substance.name() {
            substance.formula().to_owned()
        } else {
            shelf::words::what(substance)
        };
        let form = match substance.form() {
            Kind::Solid => "solid, assay",
            Kind::Liquid => "liquid,",
        };
        let strength = format!("{form} {}", shelf::words::strength(&item.material));
        (what, strength)
    }

    fn watched(&self, dose: &Dose) -> bool {
        let item = self.plan.inputs.problem.shelf.get(dose.material);
        item.is_some_and(|item| needs_second_person(self.settings, item.material.substance()))
    }

    fn flag(&self, lot: &MaterialLot) -> String {
        match lot.use_by {
            Some(day) if day < self.today => format!("past its use-by day, {day}"),
            _ => String::new(),
        }
    }

    fn lots(&self, dose: &Dose, wanted: bool) -> Vec<LotChoice> {
        let Some((material, lots)) = self.held(dose) else {
            return Vec::new();
        };
        let picked = self.typed.value("material_lot_id");
        let planned = self.amount(dose, dose.planned.get()).0;
        lots::to_choose_from(lots)
            .map(|lot| {
                let band = self.band(dose, Some(lot));
                let (instead, unit) = self.amount(dose, band.target.get());
                let mut note = Vec::new();
                if instead != planned {
                    let how = if band.target < dose.planned {
                        "stronger"
                    } else {
                        "weaker"
                    };
                    note.push(format!(
                        "{how} than planned, {}: {instead} {unit} does what is planned",
                        shelf::words::strength(&material.chemistry(Some(lot), self.plan.brewed_on))
                    ));
                }
                if let Some(day) = lot.opened_on {
                    note.push(format!("opened {day}"));
                }
                LotChoice {
                    id: lot.id,
                    code: lot.code.clone(),
                    note: note.join(", "),
                    flag: self.flag(lot),
                    chosen: if wanted && self.typed.holds("actual") {
                        lot.id.to_string() == picked
                    } else {
                        lot.current
                    },
                }
            })
            .collect()
    }

    fn band(&self, dose: &Dose, lot: Option<&MaterialLot>) -> Band {
        let held = self.held(dose);
        let tolerance = held.map_or(USUAL_TOLERANCE, |(material, _)| material.tolerance());
        let chemistry = held.map(|(material, _)| material.chemistry(lot, self.plan.brewed_on));
        Band::of(self.plan, dose, lot.and(chemistry.as_ref()), tolerance)
    }

    fn shown_amount(&self, dose: &Dose, si: f64) -> f64 {
        let measure = words::dose_measure(&self.plan.inputs, dose.material);
        self.settings.units.shown(measure, si)
    }

    /// Every line that is not in, in the brewery's order; one of them is shown: the one
    /// asked for, else the first.
    pub(super) fn open_lines(&self, effect: Option<&Effect>) -> Vec<Line> {
        let all = in_order(self.plan, self.settings);
        let asked_for = self.typed.value("dose");
        let open = |dose: &&&Dose| dose.weighed.is_none();
        let shown = all
            .iter()
            .filter(open)
            .find(|dose| dose.id.to_string() == asked_for)
            .or_else(|| all.iter().find(open))
            .map(|dose| dose.id);
        let mut lines = Vec::new();
        for (index, dose) in all.iter().enumerate() {
            if dose.weighed.is_some() {
                continue;
            }
            // What was typed belongs to the line it was typed for, never to another.
            let wanted = dose.id.to_string() == asked_for;
            let of_vessel: Vec<_> = all.iter().filter(|it| it.vessel == dose.vessel).collect();
            let place = of_vessel.iter().position(|it| it.id == dose.id);
            let (amount, unit) = self.amount(dose, dose.planned.get());
            let (what, strength) = self.what(dose);
            let item = self.plan.inputs.problem.shelf.get(dose.material);
            let lots = self.lots(dose, wanted);
            let chosen = lots.iter().find(|lot| lot.chosen).map(|lot| lot.id);
            let from = self
                .held(dose)
                .and_then(|(_, lots)| lots.iter().find(|lot| Some(lot.id) == chosen));
            let band = self.band(dose, from);
            let typed = |field: &str| {
                if wanted {
                    self.typed.value(field).to_owned()
                } else {
                    String::new()
                }
            };
            lines.push(Line {
                id: dose.id,
                shown: Some(dose.id) == shown,
                step_words: format!("Line {} of {}", index + 1, all.len()),
                place: format!(
                    "line {} of {}",
                    place.map_or(1, |place| place + 1),
                    of_vessel.len()
                ),
                vessel: dose.vessel.name(),
                name: self.name(dose),
                what,
                strength,
                amount,
                unit,
                step: dose.mash_check.is_some(),
                cautions: item.map_or_else(Vec::new, |item| item.material.substance().cautions()),
                lots,
                lot_typed: typed("lot"),
                actual_typed: typed("actual"),
                reason_typed: typed("reason"),
                second_person: self.watched(dose),
                planned: self.shown_amount(dose, band.target.get()),
                tolerance: self.shown_amount(dose, band.high.get() - band.target.get()),
                asked: effect.filter(|_| wanted).map(|effect| self.asked(effect)),
                problems: if wanted {
                    self.typed.problems.clone()
                } else {
                    Vec::new()
                },
            });
        }
        lines
    }

    fn asked(&self, effect: &Effect) -> Asked {
        let figures = effect.figures(self.plan);
        Asked {
            why: effect.why.clone(),
            figures: figures.iter().map(asked_row).collect(),
        }
    }

    /// Every line that is in, the last one first.
    pub(super) fn in_lines(&self) -> Vec<InLine> {
        let zone = &self.settings.time_zone;
        let mut doses: Vec<&Dose> = self.plan.doses.iter().collect();
        doses.sort_by_key(|dose| std::cmp::Reverse(dose.weighed.as_ref().map(|it| it.at)));
        let lines = doses.into_iter().filter_map(|dose| {
            let weighed = dose.weighed.as_ref()?;
            let (amount, unit) = self.amount(dose, weighed.actual.get());
            let (planned, _) = self.amount(dose, dose.planned.get());
            let on_shelf = self
                .held(dose)
                .and_then(|(_, lots)| lots.iter().find(|lot| Some(lot.id) == weighed.lot.id));
            let corrections = weighed.corrections.iter().map(|before| {
                let (amount, unit) = self.amount(dose, before.actual);
                let lot = if before.lot.is_empty() {
                    String::new()
                } else {
                    format!(", lot {}", before.lot)
                };
                format!(
                    "{amount} {unit}{lot} stood here until {}, corrected by {}: {}",
                    format::moment(before.corrected_at, zone),
                    before.corrected_by,
                    before.because
                )
            });
            Some(InLine {
                id: dose.id,
                vessel: dose.vessel.name(),
                name: self.name(dose),
                as_planned: amount == planned,
                left_out: weighed.actual.get() == 0.0,
                amount,
                unit,
                planned,
                lot: weighed.lot.code.clone(),
                lot_flag: match on_shelf {
                    Some(lot) => self.flag(lot),
                    None if weighed.lot.code.is_empty() => String::new(),
                    None => "not a lot of the shelf".into(),
                },
                weighed: format!("{}, {}", weighed.by, format::moment(weighed.at, zone)),
                witness: weighed
                    .witness
                    .as_ref()
                    .map_or_else(String::new, |witness| witness.name.clone()),
                reason: weighed.reason.clone(),
                corrections: corrections.collect(),
                times_corrected: weighed.corrections.len(),
                second_person: self.watched(dose),
            })
        });
        lines.collect()
    }

    /// All lines vessel by vessel.
    pub(super) fn parts(&self, shown: Option<DoseId>) -> Vec<Part> {
        let mut parts: Vec<Part> = Vec::new();
        for dose in in_order(self.plan, self.settings) {
            let vessel = dose.vessel.name();
            if parts.last().is_none_or(|part| part.vessel != vessel) {
                parts.push(Part {
                    vessel,
                    steps: Vec::new(),
                    rows: Vec::new(),
                });
            }
            let Some(part) = parts.last_mut() else {
                continue;
            };
            let (amount, unit) = self.amount(dose, dose.amount().get());
            let name = self.name(dose);
            let (state, state_words) = if dose.weighed.is_some() {
                ("done", "in")
            } else if Some(dose.id) == shown {
                ("now", "now")
            } else {
                ("next", "")
            };
            part.steps.push(Step {
                id: dose.id,
                words: format!("{amount} {unit} {name}"),
                state,
                state_words,
            });
            part.rows.push(self.paper_row(dose));
        }
        parts
    }

    fn paper_row(&self, dose: &Dose) -> PaperRow {
        let (amount, unit) = self.amount(dose, dose.planned.get());
        let (what, strength) = self.what(dose);
        let label = self.plan.inputs.shelf.get(dose.material);
        let weighed = dose.weighed.as_ref();
        PaperRow {
            name: self.name(dose),
            what: format!("{what}; {strength}"),
            amount,
            unit,
            lot: label.map_or_else(String::new, |label| label.lot.clone()),
            actual: weighed.map_or_else(String::new, |weighed| {
                let (amount, unit) = self.amount(dose, weighed.actual.get());
                format!("{amount} {unit}")
            }),
            actual_lot: weighed.map_or_else(String::new, |weighed| weighed.lot.code.clone()),
            who: weighed.map_or_else(String::new, |weighed| weighed.by.clone()),
            time: weighed.map_or_else(String::new, |weighed| {
                format::moment(weighed.at, &self.settings.time_zone)
            }),
        }
    }

    /// The cautions of everything in the plan, each sentence once with what it is about.
    pub(super) fn cautions(&self) -> Vec<(String, &'static str)> {
        let mut cautions: Vec<(Vec<String>, &'static str)> = Vec::new();
        for dose in in_order(self.plan, self.settings) {
            let Some(item) = self.plan.inputs.problem.shelf.get(dose.material) else {
                continue;
            };
            for sentence in item.material.substance().cautions() {
                match cautions.iter_mut().find(|(_, known)| *known == sentence) {
                    None => cautions.push((vec![item.name.clone()], sentence)),
                    Some((names, _)) if names.contains(&item.name) => {}
                    Some((names, _)) => names.push(item.name.clone()),
                }
            }
        }
        cautions
            .into_iter()
            .map(|(names, sentence)| (names.join(", "), sentence))
            .collect()
    }

    /// How much of which water the batch takes.
    pub(super) fn waters(&self) -> Vec<String> {
        let liquor = self.plan.inputs.problem.volumes.liquor.get();
        let sources = self.plan.inputs.sources.iter().zip(&self.plan.shares);
        sources
            .filter(|(_, share)| share.get() > 0.0)
            .map(|(source, share)| {
                let units = self.settings.units;
                let volume = units.show(Measure::Volume, share.get() * liquor);
                format!("{volume} {}", source.name)
            })
            .collect()
    }
}

fn asked_row(figure: &Moved) -> AskedRow {
    let (stands, stands_words) = match figure.stands() {
        Some("within") => ("within", "within"),
        Some("below") => ("below", "below"),
        Some(_) => ("above", "above"),
        None => ("", ""),
    };
    AskedRow {
        name: figure.name.clone(),
        before: figure.shown(figure.before),
        after: figure.shown(figure.after),
        unit: figure.unit,
        window: figure.window_words(),
        stands,
        stands_words,
        moves: figure.moves(),
    }
}
