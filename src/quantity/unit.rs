//! The units a value may carry, their spellings, and how a message speaks of them.

/// What a value measures.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Unit {
    /// Ω
    Ohm,
    /// F
    Farad,
    /// H
    Henry,
    /// V
    Volt,
    /// A
    Ampere,
    /// s
    Second,
    /// Hz
    Hertz,
    /// W
    Watt,
    /// eV
    ElectronVolt,
    /// A pure number.
    Plain,
}

impl Unit {
    /// Every unit that has a symbol.
    pub(super) const WITH_SYMBOL: [Unit; 9] = [
        Unit::Ohm,
        Unit::Farad,
        Unit::Henry,
        Unit::Volt,
        Unit::Ampere,
        Unit::Second,
        Unit::Hertz,
        Unit::Watt,
        Unit::ElectronVolt,
    ];

    /// The symbol printed behind a value; empty for a pure number.
    pub fn symbol(self) -> &'static str {
        match self {
            Unit::Ohm => "Ω",
            Unit::Farad => "F",
            Unit::Henry => "H",
            Unit::Volt => "V",
            Unit::Ampere => "A",
            Unit::Second => "s",
            Unit::Hertz => "Hz",
            Unit::Watt => "W",
            Unit::ElectronVolt => "eV",
            Unit::Plain => "",
        }
    }

    /// The spellings read, the empty one (no unit) apart. Greek omega and the ohm sign are two characters.
    pub(super) fn spellings(self) -> &'static [&'static str] {
        match self {
            Unit::Ohm => &["\u{3a9}", "\u{2126}", "ohm", "ohms", "Ohm", "Ohms", "R"],
            Unit::Farad => &["F"],
            Unit::Henry => &["H"],
            Unit::Volt => &["V"],
            Unit::Ampere => &["A"],
            Unit::Second => &["s"],
            Unit::Hertz => &["Hz", "hz", "HZ"],
            Unit::Watt => &["W"],
            Unit::ElectronVolt => &["eV"],
            Unit::Plain => &[],
        }
    }

    /// The letter that may stand in place of the decimal point for the bare unit: `4R7`, `3V3`.
    pub(super) fn mark(self) -> Option<char> {
        match self {
            Unit::Ohm => Some('R'),
            Unit::Farad => Some('F'),
            Unit::Henry => Some('H'),
            Unit::Volt => Some('V'),
            Unit::Ampere => Some('A'),
            _ => None,
        }
    }

    /// What is wanted, with an example, for messages.
    pub fn wanted(self) -> &'static str {
        match self {
            Unit::Ohm => "a resistance such as 4k7, 4R7 or 4.7kΩ",
            Unit::Farad => "a capacitance such as 4u7, 100n or 220pF",
            Unit::Henry => "an inductance such as 2.5, 10m or 3H3",
            Unit::Volt => "a voltage such as 12, 700m or 1.5V",
            Unit::Ampere => "a current such as 1m, 10u or 2.5mA",
            Unit::Second => "a time such as 20ms or 420p",
            Unit::Hertz => "a frequency such as 1k, 20Hz or 15.7kHz",
            Unit::Watt => "a power such as 0.25 or 500m",
            Unit::ElectronVolt => "an energy in electron volts such as 1.11",
            Unit::Plain => "a number such as 420 or 1.6",
        }
    }

    /// Plural name of the unit, for messages.
    pub(super) fn name(self) -> &'static str {
        match self {
            Unit::Ohm => "ohms",
            Unit::Farad => "farads",
            Unit::Henry => "henries",
            Unit::Volt => "volts",
            Unit::Ampere => "amperes",
            Unit::Second => "seconds",
            Unit::Hertz => "hertz",
            Unit::Watt => "watts",
            Unit::ElectronVolt => "electron volts",
            Unit::Plain => "no unit",
        }
    }
}
