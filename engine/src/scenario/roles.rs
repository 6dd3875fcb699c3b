//! The parameters that the shorthands know: their names, what they measure, and which model or route uses them.

use super::{AmountUnit, Model, Role};
use crate::quantity::Dimension;

/// What is known of a parameter before the file is read.
pub(super) struct Kind {
    pub(super) role: Role,
    /// Its name with two compartments.
    pub(super) name: &'static str,
    pub(super) dimension: Dimension,
    pub(super) example: &'static str,
    pub(super) sign: Sign,
}

/// Which values a parameter can have.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Sign {
    /// Above zero.
    Positive,
    /// Zero too, which is doubtful enough for a warning.
    ZeroDoubtful,
    /// Zero too.
    ZeroFine,
}

/// Every parameter, in the order in which missing ones are named.
pub(super) const KINDS: [Kind; 7] = [
    kind(Role::Clearance, "clearance", Dimension::CLEARANCE, "5 L/h", Sign::ZeroDoubtful),
    kind(Role::CentralVolume, "central_volume", Dimension::VOLUME, "30 L", Sign::Positive),
    kind(
        Role::IntercompartmentalClearance,
        "intercompartmental_clearance",
        Dimension::CLEARANCE,
        "8 L/h",
        Sign::ZeroDoubtful,
    ),
    kind(Role::PeripheralVolume, "peripheral_volume", Dimension::VOLUME, "40 L", Sign::Positive),
    kind(Role::AbsorptionRate, "absorption_rate", Dimension::RATE, "1.2 /h", Sign::Positive),
    kind(Role::LagTime, "lag_time", Dimension::TIME, "0.25 h", Sign::ZeroFine),
    kind(Role::Bioavailability, "bioavailability", Dimension::NONE, "80 %", Sign::ZeroDoubtful),
];

const fn kind(role: Role, name: &'static str, dimension: Dimension, example: &'static str, sign: Sign) -> Kind {
    Kind { role, name, dimension, example, sign }
}

/// The central volume's name with one compartment, where no other volume has to be told apart.
pub(super) const ONE_VOLUME: &str = "volume";

impl Role {
    /// Its name in the file.
    pub fn name(self, model: Model) -> &'static str {
        if self == Self::CentralVolume && model == Model::OneCompartment {
            return ONE_VOLUME;
        }
        KINDS.iter().find(|kind| kind.role == self).map_or("", |kind| kind.name)
    }

    /// The unit of its values inside.
    pub fn unit(self) -> &'static str {
        match self {
            Self::Clearance | Self::IntercompartmentalClearance => "L/h",
            Self::CentralVolume | Self::PeripheralVolume => "L",
            Self::AbsorptionRate => "/h",
            Self::LagTime => "h",
            Self::Bioavailability => "1",
        }
    }

    /// Whether it is a volume.
    pub fn is_volume(self) -> bool {
        matches!(self, Self::CentralVolume | Self::PeripheralVolume)
    }

    /// Whether only oral doses use it.
    pub(super) fn oral(self) -> bool {
        matches!(self, Self::AbsorptionRate | Self::LagTime | Self::Bioavailability)
    }

    /// Whether the second compartment needs it.
    pub(super) fn peripheral(self) -> bool {
        matches!(self, Self::IntercompartmentalClearance | Self::PeripheralVolume)
    }
}

impl AmountUnit {
    /// Its symbol.
    pub fn symbol(self) -> &'static str {
        match self {
            Self::Milligram => "mg",
            Self::International => "[IU]",
            Self::Mole => "mol",
        }
    }

    /// What it measures.
    pub fn dimension(self) -> Dimension {
        match self {
            Self::Milligram => Dimension::MASS,
            Self::International => Dimension::UNITS,
            Self::Mole => Dimension::SUBSTANCE,
        }
    }

    /// Every one.
    pub(super) const ALL: [Self; 3] = [Self::Milligram, Self::International, Self::Mole];
}
