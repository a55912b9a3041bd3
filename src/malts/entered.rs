//! What is typed about a malt, a lot or a titration, and the checks it passes.

use chemistry::mash::{Behaviour, Groups, MaltClass, Taylor};
use chemistry::quantity::{
    Ebc, Estimate, Fraction, Grams, Lovibond, MeqPerMl, Millilitres, Ph, RelativeBuffering,
    RelativeSd,
};
use jiff::civil::Date;
use serde::{Deserialize, Serialize};

use super::{Coefficients, Malt, MaltLot, Titration, TypedJar};
use crate::error::Error;
use crate::id::{MaltId, MaltLotId, MaltTitrationId, UtcTime};
use crate::input::{Flag, Number, Problems, percent, some_share, within};

/// Most jars of one titration.
pub const MOST_JARS: usize = 24;

/// Measured coefficients of the published three-term form. All blank: none.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct CoefficientsBody {
    /// a₁, meq/(kg·pH): negative.
    pub a1_meq_per_kg_ph: Number,
    /// a₂, meq/(kg·pH²).
    pub a2_meq_per_kg_ph2: Number,
    /// a₃, meq/(kg·pH³).
    pub a3_meq_per_kg_ph3: Number,
    /// One standard deviation of the buffering, % of it. Blank: 25, assumed.
    pub sd_percent: Number,
}

/// A malt as it is entered.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct NewMaltBody {
    /// What the brewery calls it.
    #[schema(required = true, min_length = 1)]
    pub name: String,
    /// What kind it is, for example `pilsner` or `crystal`.
    #[schema(required = true, min_length = 1)]
    pub class: String,
    /// Its colour, in `colour_unit`.
    pub colour: Number,
    /// `ebc` or `lovibond`. Blank: `ebc`. Kept and returned in EBC.
    pub colour_unit: String,
    /// Who makes it.
    pub supplier: String,
    /// The brewery's own figure for its pH in distilled water, cooled sample.
    pub distilled_ph: Number,
    /// Its standard deviation. Blank: the spread of the class, assumed.
    pub distilled_ph_sd: Number,
    /// The brewery's own figure for its buffering, relative to an average pale malt.
    pub relative_buffering: Number,
    /// Its standard deviation. Blank: the spread of the class, assumed.
    pub relative_buffering_sd: Number,
    /// Lactic acid in acidulated malt, % of its weight.
    pub lactic_percent: Number,
    /// Its standard deviation, percentage points. Blank: 0.6, assumed.
    pub lactic_sd_percent: Number,
    /// Measured coefficients.
    pub coefficients: CoefficientsBody,
    /// Anything else.
    pub notes: String,
    /// Whether grists may use it.
    pub in_use: Flag,
}

impl From<&Malt> for NewMaltBody {
    fn from(malt: &Malt) -> Self {
        let terms = malt.coefficients.map(|coefficients| coefficients.terms);
        Self {
            name: malt.name.clone(),
            class: malt.class.key().into(),
            colour: malt.colour.map(Ebc::get).into(),
            colour_unit: "ebc".into(),
            supplier: malt.supplier.clone().unwrap_or_default(),
            distilled_ph: malt.distilled_ph.map(|ph| ph.value.get()).into(),
            distilled_ph_sd: malt.distilled_ph.map(|ph| ph.sd).into(),
            relative_buffering: malt.buffering.map(|b| b.value.get()).into(),
            relative_buffering_sd: malt.buffering.map(|b| b.sd).into(),
            lactic_percent: malt.lactic.map(|share| percent(share.value.get())).into(),
            lactic_sd_percent: malt.lactic.map(|share| percent(share.sd)).into(),
            coefficients: CoefficientsBody {
                a1_meq_per_kg_ph: terms.map(|terms| terms[0]).into(),
                a2_meq_per_kg_ph2: terms.map(|terms| terms[1]).into(),
                a3_meq_per_kg_ph3: terms.map(|terms| terms[2]).into(),
                sd_percent: malt
                    .coefficients
                    .map(|coefficients| percent(coefficients.relative_sd.get()))
                    .into(),
            },
            notes: malt.notes.clone().unwrap_or_default(),
            in_use: Flag(malt.in_use),
        }
    }
}

impl TryFrom<NewMaltBody> for Malt {
    type Error = Error;

    /// A new malt; whoever revises one keeps its identifier and counts its version.
    fn try_from(body: NewMaltBody) -> Result<Self, Error> {
        let mut problems = Problems::new();
        let checked = malt(&body, &mut problems);
        problems.finish()?;
        checked.ok_or_else(|| Error::field("", "Fill in every field."))
    }
}

fn malt(body: &NewMaltBody, problems: &mut Problems) -> Option<Malt> {
    let name = problems.text("name", &body.name, 80);
    let class = problems.choice("class", &body.class, MaltClass::from_key);
    let colour = colour(body, problems);
    if class == Some(MaltClass::Crystal) && body.colour.is_missing() {
        problems.add(
            "colour",
            "Enter the colour: how acid a crystal malt is follows from it.",
        );
    }
    let supplier = problems.optional_text("supplier", &body.supplier, 80);
    let notes = problems.optional_text("notes", &body.notes, 2000);
    let assumed = class?.behaviour(colour.map(Lovibond::from));
    let usual = match assumed {
        Behaviour::Groups(groups) | Behaviour::Acidulated { base: groups, .. } => Some(groups),
        Behaviour::Taylor(_) => None,
    };
    let acidulated = class == Some(MaltClass::Acidulated);
    if acidulated {
        only_lactic(body, problems);
    } else if !body.lactic_percent.is_missing() {
        problems.add(
            "lactic_percent",
            "Only acidulated malt carries lactic acid. Leave this blank or choose that class.",
        );
    }
    let distilled_ph = own_ph(body, usual, problems);
    let buffering = own_buffering(body, usual, problems);
    let lactic = lactic(&body.lactic_percent, &body.lactic_sd_percent, problems);
    let coefficients =
        problems.within("coefficients", |problems| body.coefficients.check(problems));
    if let Some(coefficients) = coefficients {
        match distilled_ph {
            None if !acidulated && body.distilled_ph.is_missing() => problems.add(
                "distilled_ph",
                "The coefficients need the distilled-water pH they were measured from.",
            ),
            Some(ph) => {
                let made = Taylor::new(ph, coefficients.terms, coefficients.relative_sd);
                if let Err(error) = made {
                    problems.add("coefficients.a1_meq_per_kg_ph", error.to_string());
                }
            }
            None => {}
        }
    }
    Some(Malt {
        id: MaltId::new(),
        name: name?,
        class: class?,
        colour,
        supplier,
        distilled_ph,
        buffering,
        lactic,
        coefficients,
        notes,
        in_use: body.in_use.0,
        version: 1,
    })
}

fn colour(body: &NewMaltBody, problems: &mut Problems) -> Option<Ebc> {
    match body.colour_unit.trim() {
        "" | "ebc" => problems.optional_quantity("colour", &body.colour, Ebc::new),
        "lovibond" => problems
            .optional_quantity("colour", &body.colour, Lovibond::new)
            .map(Ebc::from),
        _ => {
            problems.add("colour_unit", "Choose EBC or Lovibond.");
            None
        }
    }
}

/// What an acidulated malt may not have of its own.
fn only_lactic(body: &NewMaltBody, problems: &mut Problems) {
    const SENTENCE: &str =
        "Acidulated malt is described by the lactic acid in it: enter that, and leave this blank.";
    let coefficients = &body.coefficients;
    for (field, number) in [
        ("distilled_ph", &body.distilled_ph),
        ("relative_buffering", &body.relative_buffering),
        (
            "coefficients.a1_meq_per_kg_ph",
            &coefficients.a1_meq_per_kg_ph,
        ),
    ] {
        if !number.is_missing() {
            problems.add(field, SENTENCE);
        }
    }
}

fn own_ph(
    body: &NewMaltBody,
    usual: Option<Groups>,
    problems: &mut Problems,
) -> Option<Estimate<Ph>> {
    let value = problems.optional_quantity("distilled_ph", &body.distilled_ph, mash_ph);
    let sd = problems.optional_quantity("distilled_ph_sd", &body.distilled_ph_sd, |sd| {
        within(sd, "pH", 0.01, 1.0)
    });
    problems.doubt_needs_figure("distilled_ph_sd", &body.distilled_ph_sd, &body.distilled_ph);
    let usual_sd = usual.map_or(0.1, |usual| usual.distilled_ph.sd);
    value.map(|value| Estimate::new(value, sd.unwrap_or(usual_sd)))
}

/// A pH that a mash or jar can have.
fn mash_ph(value: f64) -> Result<Ph, chemistry::quantity::OutOfRange> {
    within(value, "pH", 3.0, 9.0).map(Ph::clamped)
}

fn own_buffering(
    body: &NewMaltBody,
    usual: Option<Groups>,
    problems: &mut Problems,
) -> Option<Estimate<RelativeBuffering>> {
    let value =
        problems.optional_quantity("relative_buffering", &body.relative_buffering, |value| {
            within(value, "times pale malt", 0.05, 5.0).map(RelativeBuffering::clamped)
        });
    let sd =
        problems.optional_quantity("relative_buffering_sd", &body.relative_buffering_sd, |sd| {
            within(sd, "times pale malt", 0.005, 2.0)
        });
    problems.doubt_needs_figure(
        "relative_buffering_sd",
        &body.relative_buffering_sd,
        &body.relative_buffering,
    );
    let relative_sd = usual.map_or(0.25, |usual| {
        usual.buffering.sd / usual.buffering.value.get()
    });
    value.map(|value| Estimate::new(value, sd.unwrap_or(value.get() * relative_sd)))
}

/// Standard deviation of a lactic acid figure that came without one.
/// Source: that of the class, assumed.
const LACTIC_SD_PERCENT: f64 = 0.6;

fn lactic(
    lactic_percent: &Number,
    lactic_sd_percent: &Number,
    problems: &mut Problems,
) -> Option<Estimate<Fraction>> {
    let value = problems.optional_quantity("lactic_percent", lactic_percent, |value| {
        within(value, "%", 0.1, 15.0).and_then(some_share)
    });
    let sd = problems.optional_quantity("lactic_sd_percent", lactic_sd_percent, |sd| {
        within(sd, "%", 0.0, 5.0)
    });
    problems.doubt_needs_figure("lactic_sd_percent", lactic_sd_percent, lactic_percent);
    value.map(|value| Estimate::new(value, sd.unwrap_or(LACTIC_SD_PERCENT) / 100.0))
}

impl CoefficientsBody {
    fn check(&self, problems: &mut Problems) -> Option<Coefficients> {
        let terms = [
            ("a1_meq_per_kg_ph", &self.a1_meq_per_kg_ph),
            ("a2_meq_per_kg_ph2", &self.a2_meq_per_kg_ph2),
            ("a3_meq_per_kg_ph3", &self.a3_meq_per_kg_ph3),
        ];
        if terms.iter().all(|(_, number)| number.is_missing()) {
            problems.doubt_needs_figure("sd_percent", &self.sd_percent, &Number::Missing);
            return None;
        }
        let [a1, a2, a3] =
            terms.map(|(field, number)| problems.quantity(field, number, Ok::<f64, String>));
        let sd = problems.optional_quantity("sd_percent", &self.sd_percent, |sd| {
            within(sd, "%", 0.0, 100.0)
        });
        Some(Coefficients {
            terms: [a1?, a2?, a3?],
            relative_sd: RelativeSd::clamped(sd.unwrap_or(25.0) / 100.0),
        })
    }
}

/// A lot of a malt as it is entered.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct NewMaltLotBody {
    /// The code on the bag.
    #[schema(required = true, min_length = 1)]
    pub code: String,
    /// When it came, `2026-03-31`. May be blank.
    pub received_on: String,
    /// The wort pH on its data sheet.
    pub wort_ph: Number,
    /// The lactic acid its certificate gives, for acidulated malt, % of the weight.
    pub lactic_percent: Number,
    /// Its standard deviation, percentage points. Blank: 0.6, assumed.
    pub lactic_sd_percent: Number,
    /// Whether it is the one being mashed from. The one before it no longer is.
    pub current: Flag,
    /// Anything else.
    pub notes: String,
    /// Whether it is still there.
    pub in_use: Flag,
}

impl From<&MaltLot> for NewMaltLotBody {
    fn from(lot: &MaltLot) -> Self {
        Self {
            code: lot.code.clone(),
            received_on: lot
                .received_on
                .map(|date| date.to_string())
                .unwrap_or_default(),
            wort_ph: lot.wort_ph.map(Ph::get).into(),
            lactic_percent: lot.lactic.map(|share| percent(share.value.get())).into(),
            lactic_sd_percent: lot.lactic.map(|share| percent(share.sd)).into(),
            current: Flag(lot.current),
            notes: lot.notes.clone().unwrap_or_default(),
            in_use: Flag(lot.in_use),
        }
    }
}

impl NewMaltLotBody {
    /// What the form of a new lot begins with.
    pub fn offered() -> Self {
        Self {
            current: Flag(true),
            in_use: Flag(true),
            ..Self::default()
        }
    }

    /// A new lot of this malt; whoever revises one keeps its identifier and titrations
    /// and counts its version. `today` is the brewery's date.
    pub fn lot_of(self, malt: &Malt, today: Date) -> Result<MaltLot, Error> {
        let mut problems = Problems::new();
        let checked = lot(&self, malt, today, &mut problems);
        problems.finish()?;
        checked.ok_or_else(|| Error::field("", "Fill in every field."))
    }
}

fn lot(
    body: &NewMaltLotBody,
    malt: &Malt,
    today: Date,
    problems: &mut Problems,
) -> Option<MaltLot> {
    let code = problems.text("code", &body.code, 60);
    let received_on = problems.past_date("received_on", &body.received_on, today);
    let wort_ph = problems.optional_quantity("wort_ph", &body.wort_ph, mash_ph);
    let lactic = lactic(&body.lactic_percent, &body.lactic_sd_percent, problems);
    let acidulated = malt.class == MaltClass::Acidulated;
    if acidulated && !body.wort_ph.is_missing() {
        problems.add(
            "wort_ph",
            "Acidulated malt is described by the lactic acid in it: enter that, and leave this blank.",
        );
    }
    if !acidulated && !body.lactic_percent.is_missing() {
        problems.add(
            "lactic_percent",
            "Only acidulated malt carries lactic acid. Leave this blank.",
        );
    }
    if body.current.0 && !body.in_use.0 {
        problems.add(
            "current",
            "A lot that is used up cannot be the current one.",
        );
    }
    let notes = problems.optional_text("notes", &body.notes, 2000);
    Some(MaltLot {
        id: MaltLotId::new(),
        malt_id: malt.id,
        code: code?,
        received_on,
        wort_ph,
        lactic,
        current: body.current.0,
        notes,
        in_use: body.in_use.0,
        version: 1,
        titrations: Vec::new(),
    })
}

/// One jar as it is typed.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct JarBody {
    /// Acid added, mL. Blank: none.
    pub acid_ml: Number,
    /// Base added, mL. Blank: none.
    pub base_ml: Number,
    /// pH of the sample cooled to 20 °C.
    pub ph: Number,
}

impl JarBody {
    fn is_blank(&self) -> bool {
        self.acid_ml.is_missing() && self.base_ml.is_missing() && self.ph.is_missing()
    }
}

/// A bench titration as it is typed.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct NewTitrationBody {
    /// When it was done, `2026-03-31`.
    pub tested_on: String,
    /// Malt in each jar, as-is weight, g.
    #[schema(required = true)]
    pub malt_g: Number,
    /// Strength of the acid, meq/mL (mol/L of hydrochloric acid).
    pub acid_meq_per_ml: Number,
    /// Strength of the base, meq/mL (mol/L of sodium hydroxide).
    pub base_meq_per_ml: Number,
    /// The jars; blank ones are left out.
    #[schema(required = true)]
    pub jars: Vec<JarBody>,
    /// Anything else.
    pub notes: String,
}

impl From<&Titration> for NewTitrationBody {
    fn from(titration: &Titration) -> Self {
        let jar = |jar: &TypedJar| {
            let [acid, base, ph] = jar.typed.clone();
            JarBody {
                acid_ml: Number::Typed(acid),
                base_ml: Number::Typed(base),
                ph: Number::Typed(ph),
            }
        };
        Self {
            tested_on: titration.tested_on.to_string(),
            malt_g: titration.malt.get().into(),
            acid_meq_per_ml: titration.acid.map(MeqPerMl::get).into(),
            base_meq_per_ml: titration.base.map(MeqPerMl::get).into(),
            jars: titration.jars.iter().map(jar).collect(),
            notes: titration.notes.clone().unwrap_or_default(),
        }
    }
}

impl NewTitrationBody {
    /// A titration of this lot that says something of the malt. `today` is the
    /// brewery's date, `by` who enters it.
    pub fn titration_of(self, lot: &MaltLot, today: Date, by: &str) -> Result<Titration, Error> {
        let mut problems = Problems::new();
        let checked = titration(&self, lot.id, today, by, &mut problems);
        problems.finish()?;
        let titration = checked.ok_or_else(|| Error::field("", "Fill in every field."))?;
        match titration.fit() {
            Ok(_) => Ok(titration),
            Err(error) => Err(Error::field("jars", error.to_string())),
        }
    }
}

fn titration(
    body: &NewTitrationBody,
    malt_lot_id: MaltLotId,
    today: Date,
    by: &str,
    problems: &mut Problems,
) -> Option<Titration> {
    let tested_on = problems.past_date("tested_on", &body.tested_on, today);
    if body.tested_on.trim().is_empty() {
        problems.add("tested_on", "Enter the day of the titration.");
    }
    let malt = problems.quantity("malt_g", &body.malt_g, |grams| {
        within(grams, "g", 1.0, 5000.0).map(Grams::clamped)
    });
    let strength = |value| within(value, "meq/mL", 0.001, 20.0).map(MeqPerMl::clamped);
    let acid = problems.optional_quantity("acid_meq_per_ml", &body.acid_meq_per_ml, strength);
    let base = problems.optional_quantity("base_meq_per_ml", &body.base_meq_per_ml, strength);
    let jars = jars(&body.jars, problems);
    let needed = |typed: &Number, added: fn(&TypedJar) -> Millilitres| {
        typed.is_missing() && jars.iter().any(|jar| added(jar).get() > 0.0)
    };
    if needed(&body.acid_meq_per_ml, |jar| jar.acid) {
        problems.add(
            "acid_meq_per_ml",
            "Enter the strength of the acid that was added.",
        );
    }
    if needed(&body.base_meq_per_ml, |jar| jar.base) {
        problems.add(
            "base_meq_per_ml",
            "Enter the strength of the base that was added.",
        );
    }
    let notes = problems.optional_text("notes", &body.notes, 2000);
    Some(Titration {
        id: MaltTitrationId::new(),
        malt_lot_id,
        tested_on: tested_on?,
        malt: malt?,
        acid,
        base,
        jars,
        notes,
        entered_at: UtcTime::now(),
        entered_by: by.to_owned(),
        withdrawn: None,
    })
}

fn jars(bodies: &[JarBody], problems: &mut Problems) -> Vec<TypedJar> {
    if bodies.len() > MOST_JARS {
        problems.add("jars", format!("At most {MOST_JARS} jars."));
        return Vec::new();
    }
    let typed = bodies.iter().enumerate().filter(|(_, jar)| !jar.is_blank());
    let mut jars = Vec::new();
    for (index, body) in typed {
        let jar = problems.within(format!("jars.{index}"), |problems| jar(body, problems));
        jars.extend(jar);
    }
    jars
}

fn jar(body: &JarBody, problems: &mut Problems) -> Option<TypedJar> {
    let millilitres = |value| within(value, "mL", 0.0, 10_000.0).map(Millilitres::clamped);
    let nothing = Millilitres::constant(0.0);
    let acid = problems.optional_quantity("acid_ml", &body.acid_ml, millilitres);
    let base = problems.optional_quantity("base_ml", &body.base_ml, millilitres);
    let ph = if body.ph.is_missing() {
        problems.add("ph", "Enter the pH of this jar, or clear the line.");
        None
    } else {
        problems.quantity("ph", &body.ph, mash_ph)
    };
    Some(TypedJar {
        acid: acid.unwrap_or(nothing),
        base: base.unwrap_or(nothing),
        ph: ph?,
        typed: [&body.acid_ml, &body.base_ml, &body.ph].map(as_typed),
    })
}

fn as_typed(number: &Number) -> String {
    match number {
        Number::Missing => String::new(),
        Number::Given(value) => value.to_string(),
        Number::Typed(text) => text.clone(),
    }
}
