//! Why a command of the person could not be done, and what to do instead.

/// Why a command could not be done, with the remedy.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum Refusal {
    /// `void` of a number that no segment has.
    #[error("there is no segment {0}: nothing was voided")]
    NoSuchSegment(u32),
    /// `void` of a void segment.
    #[error("segment {0} is void already")]
    AlreadyVoid(u32),
    /// `restore` of a segment that counts.
    #[error("segment {0} is not void: it counts")]
    NotVoid(u32),
    /// `zero` on the move.
    #[error("no zero: the car moves at {0:.1} km/h; stop first")]
    Moving(f64),
    /// `zero` without a speed.
    #[error("no zero: there is no speed, so nobody knows that the car stands; check the speed's port")]
    NoSpeed,
    /// `zero` too soon after stopping.
    #[error("no zero: the car has stood for {have_s:.1} s; wait until {need_s:.1} s")]
    StandLonger {
        /// How long it has stood.
        have_s: f64,
        /// How long it must.
        need_s: f64,
    },
    /// A letter that the outing does not have.
    #[error("there is no configuration `{letter}`: the outing has {known}")]
    NoSuchConfiguration {
        /// What was asked for.
        letter: String,
        /// What there is.
        known: String,
    },
    /// A channel or tap that rig and car do not have, or a tap on two channels.
    #[error("taps unchanged: {0}")]
    Taps(String),
    /// `span begin` twice.
    #[error("a span is open already: end it first")]
    SpanOpen,
    /// `span end` without a begin.
    #[error("no span is open: begin one first")]
    NoSpan,
}
