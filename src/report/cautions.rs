//! What must be said wherever a filter is proposed: page, bench sheet, README.

/// One caution.
#[derive(Debug, Clone, Copy, PartialEq, Eq, serde::Serialize)]
pub struct Caution {
    /// What it is about, in a few words.
    pub topic: &'static str,
    /// The caution, in plain words.
    pub text: &'static str,
}

/// All of them, in the order in which they are printed.
pub const CAUTIONS: [Caution; 7] = [
    Caution {
        topic: "Signal lines only",
        text: "These filters are for low-level signal lines. Never put one on or across the mains: \
               capacitors there are classed parts (IEC 60384-14), and the work is for licensed people.",
    },
    Caution {
        topic: "Protective earth stays",
        text: "Never lift a protective earth to break a loop. Break the loop in the signal path instead.",
    },
    Caution { topic: "Not on patients", text: "Not on patient-connected equipment (IEC 60601-1)." },
    Caution {
        topic: "Not in safety functions",
        text: "Not in a line that a safety function relies on (IEC 61511).",
    },
    Caution {
        topic: "Not in intrinsically safe loops",
        text: "Added inductance and capacitance store energy and change what the loop was certified for \
               (IEC 60079-11).",
    },
    Caution {
        topic: "Mind the volume",
        text: "Start listening with the volume down. What was removed can be much louder than what is left.",
    },
    Caution {
        topic: "Who decides",
        text: "Local codes and a licensed practitioner decide what may be connected, where and how. \
               This page does not.",
    },
];

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_standards_that_draw_the_lines_are_named() {
        let all: String = CAUTIONS.iter().map(|caution| caution.text).collect();
        for standard in ["IEC 60384-14", "IEC 60601-1", "IEC 61511", "IEC 60079-11"] {
            assert!(all.contains(standard), "{standard} is missing");
        }
    }
}
