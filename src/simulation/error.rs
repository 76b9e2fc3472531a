//! Why a recording could not be sent through a network.

/// Why a recording could not be sent through a network.
#[derive(Debug, thiserror::Error)]
pub enum SimulationError {
    /// Reading or writing failed.
    #[error(transparent)]
    Capture(#[from] crate::capture::CaptureError),
    /// The network has no response somewhere.
    #[error(
        "the network's insertion ratio at {frequency_hz} Hz is {found}, a finite number is expected; check the part values in the plan"
    )]
    ResponseNotFinite {
        /// Frequency in hertz.
        frequency_hz: f64,
        /// What came out.
        found: String,
    },
    /// The network rings for longer than the memory allows.
    #[error(
        "the network is still ringing {longest_s:.1} s after an impulse, with {left:.1e} of its response still to come (at most {allowed:.0e} is expected); make its slowest part faster (a smaller coupling capacitor or coil), or simulate at a lower sample rate"
    )]
    RingsTooLong {
        /// Longest ringing that is simulated, seconds.
        longest_s: f64,
        /// Root of the energy beyond it, relative to the largest response.
        left: f64,
        /// What may be left.
        allowed: f64,
    },
    /// A channel that the recording does not have.
    #[error(
        "channel {channel} was analysed, but {capture} has {channels}; analyse this recording, or choose a channel it has"
    )]
    NoSuchChannel {
        /// The recording.
        capture: String,
        /// Channel asked for, 1 first.
        channel: usize,
        /// Channels there.
        channels: usize,
    },
}
