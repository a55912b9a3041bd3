//! Every source a figure in this crate rests on, once.

use std::fmt;

/// A published source.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Reference {
    /// Authors or issuing body.
    pub authors: &'static str,
    /// Year of publication.
    pub year: u16,
    /// Title.
    pub title: &'static str,
    /// Where to find it.
    pub place: &'static str,
}

impl fmt::Display for Reference {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(
            f,
            "{} ({}): {}. {}",
            self.authors, self.year, self.title, self.place
        )
    }
}

/// Atomic weights behind every molar mass.
pub const IUPAC_2021: Reference = Reference {
    authors: "IUPAC Commission on Isotopic Abundances and Atomic Weights",
    year: 2021,
    title: "Standard atomic weights of the elements, abridged to five figures",
    place: "Pure Appl. Chem. 94 (2022) 573",
};

/// Constants of the carbonate system and calcite, 0 to 90 °C.
pub const PLUMMER_BUSENBERG_1982: Reference = Reference {
    authors: "L. N. Plummer, E. Busenberg",
    year: 1982,
    title: "The solubilities of calcite, aragonite and vaterite in CO2-H2O solutions between 0 and 90 °C",
    place: "Geochim. Cosmochim. Acta 46, 1011",
};

/// Activity coefficients of single ions, water properties, and sulfate pairs.
pub const TRUESDELL_JONES_1974: Reference = Reference {
    authors: "A. H. Truesdell, B. F. Jones",
    year: 1974,
    title: "WATEQ, a computer program for calculating chemical equilibria of natural waters",
    place: "J. Res. U.S. Geol. Surv. 2, 233",
};

/// Constants of ion pairs and minerals, collected and revised.
pub const NORDSTROM_1990: Reference = Reference {
    authors: "D. K. Nordstrom, L. N. Plummer, D. Langmuir, E. Busenberg, H. M. May, B. F. Jones, D. L. Parkhurst",
    year: 1990,
    title: "Revised chemical equilibrium data for major water-mineral reactions and their limitations",
    place: "ACS Symp. Ser. 416, 398; as compiled in WATEQ4F, USGS Open-File Report 91-183",
};

/// The program the engine is compared with, and its database phreeqc.dat.
pub const PHREEQC_3: Reference = Reference {
    authors: "D. L. Parkhurst, C. A. J. Appelo",
    year: 2013,
    title: "Description of input and examples for PHREEQC version 3",
    place: "U.S. Geological Survey Techniques and Methods 6-A43; database phreeqc.dat as shipped with 3.7.3",
};

/// Stability of metal complexes, here those of citrate.
pub const NIST_46: Reference = Reference {
    authors: "A. E. Martell, R. M. Smith, R. J. Motekaitis",
    year: 2004,
    title: "NIST critically selected stability constants of metal complexes",
    place: "NIST Standard Reference Database 46, as compiled in minteq.v4.dat",
};

/// Ionisation of phosphoric, sulfuric and citric acid with temperature.
pub const GOLDBERG_2002: Reference = Reference {
    authors: "R. N. Goldberg, N. Kishore, R. M. Lennen",
    year: 2002,
    title: "Thermodynamic quantities for the ionization reactions of buffers",
    place: "J. Phys. Chem. Ref. Data 31, 231",
};

/// Ionisation of lactic acid, 0 to 50 °C.
pub const MARTIN_TARTAR_1937: Reference = Reference {
    authors: "A. W. Martin, H. V. Tartar",
    year: 1937,
    title: "The ionization constant of lactic acid, 0-50°, from conductance measurements",
    place: "J. Am. Chem. Soc. 59, 2672",
};

/// Mash pH where summed proton deficits vanish; malt as a three-term series.
pub const DELANGE_2015: Reference = Reference {
    authors: "A. J. deLange",
    year: 2015,
    title: "Predicting and controlling mash pH using simple models for mash component acid/base characteristics",
    place: "MBAA Technical Quarterly 52(1), doi 10.1094/TQ-52-1-0302-01 (abstract read)",
};

/// Alkalinity cancelled by calcium and magnesium in cast wort.
pub const KOLBACH_1953: Reference = Reference {
    authors: "P. Kolbach",
    year: 1953,
    title: "Der Einfluss des Brauwassers auf das pH von Würze und Bier",
    place: "Monatsschrift für Brauerei 6 (title from memory)",
};

/// Calcium in the liquor and the pH of mash and wort.
pub const TAYLOR_1990: Reference = Reference {
    authors: "D. G. Taylor",
    year: 1990,
    title: "The importance of pH control during brewing",
    place: "MBAA Technical Quarterly 27 (abstract and one table at second hand)",
};

/// What buffers wort: carboxylic acids below pH 5.5, phosphate hardly.
pub const LI_2016: Reference = Reference {
    authors: "Li et al.",
    year: 2016,
    title: "(on the buffering of wort; title not at hand)",
    place: "J. Inst. Brew. 122, 138 (abstract read)",
};

/// pH of wort against temperature, gravity, calcium and acid.
pub const HOSOM_2020: Reference = Reference {
    authors: "J.-P. Hosom",
    year: 2020,
    title: "(measurements of mash and wort pH, 2018 to 2020)",
    place: "open notes of the author",
};

/// pH from mash to beer, and how far it falls when a sample is warmed.
pub const MACWILLIAM_1975: Reference = Reference {
    authors: "I. C. MacWilliam",
    year: 1975,
    title: "pH in malting and brewing: a review",
    place: "J. Inst. Brew. 81, 65 (abstract read; tables at second hand)",
};

/// pH of wort, cold and at mash temperature.
pub const HOPKINS_KRAUSE_1947: Reference = Reference {
    authors: "R. H. Hopkins, B. Krause",
    year: 1947,
    title: "Biochemistry applied to malting and brewing",
    place: "George Allen & Unwin, London (at second hand)",
};

/// pH of mashes and worts, hot and cold.
pub const BRIGGS_2004: Reference = Reference {
    authors: "D. E. Briggs, C. A. Boulton, P. A. Brookes, R. Stevens",
    year: 2004,
    title: "Brewing: Science and Practice",
    place: "Woodhead Publishing, Cambridge (at second hand)",
};

/// Water, grist and the pH of the mash.
pub const TROESTER_2009: Reference = Reference {
    authors: "K. Troester",
    year: 2009,
    title: "The effect of brewing water and grist composition on the pH of the mash",
    place: "published by the author (abstract read; the rest at second hand)",
};

/// Usual pH of mash, kettle and boiled wort.
pub const SUPPLIER_NOTE: Reference = Reference {
    authors: "A British brewers' supplier",
    year: 2010,
    title: "(technical note on pH in brewing; year not at hand)",
    place: "the supplier's web pages (read)",
};

/// Acceptance of an ion balance (1030 E), hardness by calculation (2340 B).
pub const STANDARD_METHODS: Reference = Reference {
    authors: "American Public Health Association, American Water Works Association, Water Environment Federation",
    year: 2017,
    title: "Standard Methods for the Examination of Water and Wastewater",
    place: "23rd edition, parts 1030 E and 2340 B",
};

/// Conductance of dilute electrolytes: the limiting law.
pub const ONSAGER_1927: Reference = Reference {
    authors: "L. Onsager",
    year: 1927,
    title: "Zur Theorie der Elektrolyte II",
    place: "Physikalische Zeitschrift 28, 277",
};

/// The gas and Faraday constants behind the Nernst slope, exact by definition.
pub const CODATA_2018: Reference = Reference {
    authors: "E. Tiesinga, P. J. Mohr, D. B. Newell, B. N. Taylor",
    year: 2021,
    title: "CODATA recommended values of the fundamental physical constants: 2018",
    place: "J. Phys. Chem. Ref. Data 50, 033105",
};

/// pH of the phthalate standard, 0 to 60 °C.
pub const HETZER_1977: Reference = Reference {
    authors: "H. B. Hetzer, R. A. Durst, R. A. Robinson, R. G. Bates",
    year: 1977,
    title: "Standard pH values for the potassium hydrogen phthalate reference buffer solution from 0 to 60 °C",
    place: "J. Res. Natl. Bur. Stand. 81A, 21",
};

/// Drinking-water values of the European Union.
pub const EU_DRINKING_WATER_2020: Reference = Reference {
    authors: "European Parliament and Council",
    year: 2020,
    title: "Directive (EU) 2020/2184 on the quality of water intended for human consumption",
    place: "OJ L 435, 1, annex I; before it Directive 98/83/EC",
};

/// Drinking-water values of the United States.
pub const US_DRINKING_WATER: Reference = Reference {
    authors: "United States Environmental Protection Agency",
    year: 2023,
    title: "National primary and secondary drinking water regulations",
    place: "40 CFR 141 and 40 CFR 143.3",
};

/// Drinking-water values of the World Health Organization.
pub const WHO_DRINKING_WATER_2022: Reference = Reference {
    authors: "World Health Organization",
    year: 2022,
    title: "Guidelines for drinking-water quality",
    place: "4th edition with first and second addenda, Geneva",
};

/// Every source above, in that order.
pub const ALL: [Reference; 25] = [
    IUPAC_2021,
    PLUMMER_BUSENBERG_1982,
    TRUESDELL_JONES_1974,
    NORDSTROM_1990,
    PHREEQC_3,
    NIST_46,
    GOLDBERG_2002,
    MARTIN_TARTAR_1937,
    DELANGE_2015,
    KOLBACH_1953,
    TAYLOR_1990,
    LI_2016,
    HOSOM_2020,
    MACWILLIAM_1975,
    HOPKINS_KRAUSE_1947,
    BRIGGS_2004,
    TROESTER_2009,
    SUPPLIER_NOTE,
    STANDARD_METHODS,
    ONSAGER_1927,
    CODATA_2018,
    HETZER_1977,
    EU_DRINKING_WATER_2020,
    US_DRINKING_WATER,
    WHO_DRINKING_WATER_2022,
];

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_source_is_listed_once() {
        let written = include_str!("references.rs")
            .lines()
            .filter(|line| line.starts_with("pub const ") && line.contains(": Reference ="))
            .count();
        assert_eq!(ALL.len(), written);
        for (place, reference) in ALL.iter().enumerate() {
            assert!(!ALL[..place].contains(reference), "{reference}");
        }
    }
}
