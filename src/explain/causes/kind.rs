//! The kinds of causes with their words in reports.

/// What a run failed by.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
#[allow(missing_docs)]
pub enum Kind {
    RowsShifted,
    InputLate,
    InputEarly,
    InputHeld,
    InputMissing,
    JumpOffGrid,
    JumpAtStage,
    PulseMissed,
    StartValue,
    RateScaled,
    Gain,
    Sign,
    Offset,
    Unit,
    ChannelsSwapped,
    SinglePrecision,
    SinglePrecisionTime,
    CoarsePrint,
    UnstableStep,
    Ringing,
    CoarserStep,
    OtherMethod,
    LowOrderStart,
    InterpolatedRows,
    Clipped,
    Frozen,
    Noise,
}

impl Kind {
    /// The word in reports.
    pub fn word(self) -> &'static str {
        match self {
            Kind::RowsShifted => "rows-shifted",
            Kind::InputLate => "input-late",
            Kind::InputEarly => "input-early",
            Kind::InputHeld => "input-held",
            Kind::InputMissing => "input-missing",
            Kind::JumpOffGrid => "jump-off-grid",
            Kind::JumpAtStage => "jump-at-stage",
            Kind::PulseMissed => "pulse-missed",
            Kind::StartValue => "start-value",
            Kind::RateScaled => "rate-scaled",
            Kind::Gain => "gain",
            Kind::Sign => "sign",
            Kind::Offset => "offset",
            Kind::Unit => "unit",
            Kind::ChannelsSwapped => "channels-swapped",
            Kind::SinglePrecision => "single-precision",
            Kind::SinglePrecisionTime => "single-precision-time",
            Kind::CoarsePrint => "coarse-print",
            Kind::UnstableStep => "unstable-step",
            Kind::Ringing => "ringing",
            Kind::CoarserStep => "coarser-step",
            Kind::OtherMethod => "other-method",
            Kind::LowOrderStart => "low-order-start",
            Kind::InterpolatedRows => "interpolated-rows",
            Kind::Clipped => "clipped",
            Kind::Frozen => "frozen",
            Kind::Noise => "noise",
        }
    }
}
