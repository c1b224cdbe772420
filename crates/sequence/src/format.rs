//! The format of a sequence file, version 1, written down once.
//!
//! The judge, the JSON Schema and the documentation read these tables (see `shape`). The words
//! are the trade's; quantities are texts with their unit.

use crate::shape::{Field, Kind, Object, Shape, Word};

/// The version of the format.
pub(crate) const VERSION: u64 = 1;
/// Most characters of a title, a label or a file name.
const NAME_LONGEST: usize = 120;
/// Most characters of a note.
const NOTE_LONGEST: usize = 2000;
/// Most characters of a profile inside the sequence.
const CSV_LONGEST: usize = 4_000_000;

const NAME: Shape = Shape::Text {
    longest: NAME_LONGEST,
};
const TIME: Shape = Shape::Quantity(Kind::Time);

const fn must(key: &'static str, shape: Shape, meaning: &'static str) -> Field {
    Field {
        key,
        shape,
        required: true,
        meaning,
    }
}

const fn may(key: &'static str, shape: Shape, meaning: &'static str) -> Field {
    Field {
        key,
        shape,
        required: false,
        meaning,
    }
}

const fn word(word: &'static str, meaning: &'static str) -> Word {
    Word { word, meaning }
}

/// The whole file.
pub(crate) static SEQUENCE: Object = Object {
    name: "Sequence",
    meaning: "a sequence",
    fields: &[
        must(
            "sequence",
            Shape::Version(VERSION),
            "the version of the format: 1",
        ),
        must("title", NAME, "what the sequence is for"),
        may("note", NOTE, "words for people"),
        must("dut", Shape::Object(&DUT), "the device under test"),
        may(
            "readback",
            TIME,
            "readback interval of steps that name none; the bench's usual one if absent",
        ),
        may(
            "on_interruption",
            Shape::Word(ON_INTERRUPTION),
            "what to do after the host or the link came back; \"end\" if absent",
        ),
        must(
            "interlocks",
            Shape::Object(&INTERLOCKS),
            "what must stop the run",
        ),
        must("steps", steps(), "what to draw, in order"),
    ],
    one_of: &[],
};

const NOTE: Shape = Shape::Text {
    longest: NOTE_LONGEST,
};

pub(crate) const ON_INTERRUPTION: &[Word] = &[
    word("end", "end the run as interrupted"),
    word(
        "resume",
        "go on where the record stands, after checking temperature and voltage",
    ),
];

static STEP_SHAPE: Shape = Shape::Object(&STEP);

// Functions, not constants: a constant may not lead to a static that leads back to it.
const fn steps() -> Shape {
    Shape::List {
        of: &STEP_SHAPE,
        least: 1,
    }
}

static CONDITION_SHAPE: Shape = Shape::Object(&CONDITION);
const fn conditions() -> Shape {
    Shape::List {
        of: &CONDITION_SHAPE,
        least: 1,
    }
}

static DUT: Object = Object {
    name: "Dut",
    meaning: "a device under test",
    fields: &[
        may(
            "label",
            NAME,
            "what is written on it; may be given with the run instead",
        ),
        may("note", NOTE, "words for people"),
        must("kind", Shape::Word(DUT_KIND), "what kind of thing it is"),
        may(
            "rated_capacity",
            Shape::Quantity(Kind::Charge),
            "rated capacity after the maker's data sheet; needed where a current is written in It",
        ),
        must(
            "voltage_min",
            Shape::Quantity(Kind::Voltage),
            "least voltage the maker allows, of the whole device",
        ),
        must(
            "voltage_max",
            Shape::Quantity(Kind::Voltage),
            "largest voltage the maker allows, of the whole device",
        ),
        must(
            "current_max",
            Shape::Quantity(Kind::Current),
            "largest discharge current the maker allows, of the whole device",
        ),
        may("series", CELLS, "cells in series; 1 if absent"),
        may("parallel", CELLS, "strings in parallel; 1 if absent"),
    ],
    one_of: &[],
};

const CELLS: Shape = Shape::Count {
    least: 1,
    most: 1000,
};

pub(crate) const DUT_KIND: &[Word] = &[
    word("cell", "one cell"),
    word("pack", "cells in series or parallel"),
    word("supply", "a supply"),
];

/// The interlocks, in the order in which they name a trip.
pub(crate) static INTERLOCKS: Object = Object {
    name: "Interlocks",
    meaning: "a set of interlocks",
    fields: &[
        may(
            "over_temperature",
            Shape::Object(&ABOVE_TEMPERATURE),
            "heat sink too hot",
        ),
        may(
            "over_power",
            Shape::Object(&ABOVE_POWER),
            "too much power in the sink",
        ),
        may(
            "undervoltage",
            Shape::Object(&BELOW_VOLTAGE),
            "voltage of the DUT too low",
        ),
        may(
            "over_voltage",
            Shape::Object(&ABOVE_VOLTAGE),
            "voltage of the DUT too high",
        ),
        may(
            "reversed_polarity",
            Shape::Object(&BELOW_VOLTAGE),
            "voltage below this, at or under zero: the leads are reversed",
        ),
        may(
            "over_current",
            Shape::Object(&ABOVE_CURRENT),
            "current too large",
        ),
        may(
            "not_following",
            Shape::Object(&SHORT_BY),
            "readback short of the setpoint",
        ),
        may(
            "not_releasing",
            Shape::Object(&IN_EXCESS_BY),
            "readback above the setpoint: a shorted MOSFET or a lost sense wire",
        ),
        may(
            "sensor_fault",
            Shape::Object(&LASTING),
            "sensor open or shorted, reading frozen or impossible",
        ),
        may("silence", Shape::Object(&LASTING), "no valid readback"),
        may(
            "charge",
            Shape::Quantity(Kind::Charge),
            "more charge than this in the whole run",
        ),
        may(
            "energy",
            Shape::Quantity(Kind::Energy),
            "more energy than this in the whole run",
        ),
        may("time", TIME, "a run longer than this"),
        may(
            "clock",
            Shape::Object(&CLOCK_OFF),
            "the sink's clock jumps or drifts",
        ),
    ],
    one_of: &[],
};

const FOR: Field = may(
    "for",
    TIME,
    "for how long it must be crossed; the bench's own if absent",
);

macro_rules! threshold {
    ($($object:ident $name:literal $meaning:literal $key:literal $kind:ident $what:literal;)*) => {
        $(static $object: Object = Object {
            name: $name,
            meaning: $meaning,
            fields: &[must($key, Shape::Quantity(Kind::$kind), $what), FOR],
            one_of: &[],
        };)*
    };
}

threshold! {
    ABOVE_TEMPERATURE "AboveTemperature" "an interlock on a temperature"
        "above" Temperature "the temperature above which it trips";
    ABOVE_POWER "AbovePower" "an interlock on a power"
        "above" Power "the power above which it trips";
    ABOVE_VOLTAGE "AboveVoltage" "an interlock on a voltage"
        "above" Voltage "the voltage above which it trips";
    BELOW_VOLTAGE "BelowVoltage" "an interlock on a voltage"
        "below" Voltage "the voltage below which it trips";
    ABOVE_CURRENT "AboveCurrent" "an interlock on a current"
        "above" Current "the current above which it trips";
    SHORT_BY "ShortBy" "an interlock on a readback that falls short"
        "short_by" Current "how far the readback may be below the setpoint";
    IN_EXCESS_BY "InExcessBy" "an interlock on a readback in excess"
        "above_by" Current "how far the readback may be above the setpoint";
}

static LASTING: Object = Object {
    name: "Lasting",
    meaning: "an interlock on a lasting fault",
    fields: &[must("for", TIME, "how long it may last")],
    one_of: &[],
};
static CLOCK_OFF: Object = Object {
    name: "ClockOff",
    meaning: "an interlock on the sink's clock",
    fields: &[must(
        "off_by",
        TIME,
        "how far the sink's clock may be off the host's",
    )],
    one_of: &[],
};

/// The keys that say what a step does.
pub(crate) const ACTIONS: &[&str] = &[
    "rest",
    "draw",
    "draw_power",
    "draw_resistance",
    "ramp",
    "profile",
    "repeat",
];

pub(crate) static STEP: Object = Object {
    name: "Step",
    meaning: "a step",
    fields: &[
        may(
            "rest",
            TIME,
            "no current for this time; with `until`, at most for it",
        ),
        may(
            "draw",
            Shape::Quantity(Kind::RatedCurrent),
            "a constant current, in amperes or as a multiple of the rated capacity",
        ),
        may(
            "draw_power",
            Shape::Quantity(Kind::Power),
            "a constant power",
        ),
        may(
            "draw_resistance",
            Shape::Quantity(Kind::Resistance),
            "a constant resistance",
        ),
        may(
            "ramp",
            Shape::Object(&RAMP),
            "a current that changes along a straight line",
        ),
        may(
            "profile",
            Shape::Object(&PROFILE),
            "a current given as pairs of time and current",
        ),
        may(
            "repeat",
            Shape::Object(&REPEAT),
            "steps to go through again",
        ),
        may("for", TIME, "for just this time (draws)"),
        may(
            "at_most",
            TIME,
            "the longest time, should no condition hold (draws with `until`)",
        ),
        may(
            "until",
            conditions(),
            "conditions that end the step; the first to hold does",
        ),
        may(
            "then",
            Shape::WordOr(NEXT, &SKIP),
            "what follows when the step's time is over; \"go_on\" if absent",
        ),
        may("label", NAME, "a name for figures and skips"),
        may("note", NOTE, "words for people"),
        may("readback", TIME, "readback interval during the step"),
        may(
            "may_give_up",
            Shape::Bool,
            "the source is expected to give up: not following ends the step and is no trip",
        ),
        may(
            "burst",
            Shape::Object(&BURST),
            "every sample around the step's beginning",
        ),
    ],
    one_of: ACTIONS,
};

pub(crate) const NEXT: &[Word] = &[
    word("go_on", "the next step"),
    word("end", "the run has finished"),
];

static SKIP: Object = Object {
    name: "Skip",
    meaning: "a skip",
    fields: &[must("skip_to", NAME, "the label of a later step")],
    one_of: &[],
};

static RAMP: Object = Object {
    name: "Ramp",
    meaning: "a ramp",
    fields: &[
        may(
            "from",
            Shape::Quantity(Kind::RatedCurrent),
            "the current it begins with; that of the step before if absent",
        ),
        must(
            "to",
            Shape::Quantity(Kind::RatedCurrent),
            "the current it ends with",
        ),
        must("over", TIME, "how long it takes"),
    ],
    one_of: &[],
};

static PAIR: Shape = Shape::Tuple(&[TIME, Shape::Quantity(Kind::RatedCurrent)]);

static PROFILE: Object = Object {
    name: "Profile",
    meaning: "a profile",
    fields: &[
        may(
            "points",
            Shape::List {
                of: &PAIR,
                least: 2,
            },
            "pairs of time and current",
        ),
        may(
            "csv",
            Shape::Text {
                longest: CSV_LONGEST,
            },
            "the text of a CSV with a header such as time_s,current_a",
        ),
        may(
            "file",
            NAME,
            "the name of a CSV file given beside the sequence",
        ),
        must(
            "interpolation",
            Shape::Word(INTERPOLATION),
            "what the current does between two pairs",
        ),
        may(
            "import",
            Shape::Object(&IMPORT),
            "makes the fewest steps of a recording; without it each pair is drawn as it stands",
        ),
    ],
    one_of: &["points", "csv", "file"],
};

static IMPORT: Object = Object {
    name: "Import",
    meaning: "an import",
    fields: &[
        must(
            "error",
            Shape::Quantity(Kind::Current),
            "the largest error of the current, at least one step of the sink's converter",
        ),
        may(
            "period",
            TIME,
            "the period of the recording's cycle; cycles that agree become one that is repeated",
        ),
        may(
            "clip_above",
            Shape::Quantity(Kind::Current),
            "the current at which peaks are cut; without it none is",
        ),
    ],
    one_of: &[],
};

pub(crate) const INTERPOLATION: &[Word] = &[
    word("steps", "it stays until the next pair"),
    word("linear", "it follows the straight line to the next pair"),
];

static REPEAT: Object = Object {
    name: "Repeat",
    meaning: "a repeat",
    fields: &[
        may(
            "times",
            Shape::Count {
                least: 1,
                most: 1_000_000_000,
            },
            "how often; without it, until a condition holds or the time is over",
        ),
        must("steps", steps(), "the steps to go through"),
        may(
            "until",
            conditions(),
            "conditions that end the repeat at once, at any place in it",
        ),
        may("at_most", TIME, "the longest time it may take"),
    ],
    one_of: &[],
};

/// The keys that say what a condition watches.
pub(crate) const CONDITIONS: &[&str] = &[
    "voltage_below",
    "voltage_above",
    "current_below",
    "current_above",
    "charge",
    "energy",
    "temperature_above",
    "temperature_below",
    "voltage_settled",
    "temperature_settled",
    "elapsed",
];

static CONDITION: Object = Object {
    name: "Condition",
    meaning: "a condition",
    fields: &[
        may(
            "voltage_below",
            Shape::Quantity(Kind::Voltage),
            "voltage below this",
        ),
        may(
            "voltage_above",
            Shape::Quantity(Kind::Voltage),
            "voltage above this",
        ),
        may(
            "current_below",
            Shape::Quantity(Kind::Current),
            "current below this",
        ),
        may(
            "current_above",
            Shape::Quantity(Kind::Current),
            "current above this",
        ),
        may(
            "charge",
            Shape::Quantity(Kind::Charge),
            "charge drawn since the step or repeat began",
        ),
        may(
            "energy",
            Shape::Quantity(Kind::Energy),
            "energy drawn since the step or repeat began",
        ),
        may(
            "temperature_above",
            Shape::Quantity(Kind::Temperature),
            "heat sink hotter than this",
        ),
        may(
            "temperature_below",
            Shape::Quantity(Kind::Temperature),
            "heat sink cooler than this",
        ),
        may(
            "voltage_settled",
            Shape::Object(&VOLTAGE_SETTLED),
            "voltage has settled",
        ),
        may(
            "temperature_settled",
            Shape::Object(&TEMPERATURE_SETTLED),
            "temperature has settled",
        ),
        may("elapsed", TIME, "time since the step or repeat began"),
        may("for", TIME, "for how long it must hold; at once if absent"),
        may(
            "then",
            Shape::WordOr(NEXT, &SKIP),
            "what follows; \"go_on\" if absent",
        ),
    ],
    one_of: CONDITIONS,
};

static VOLTAGE_SETTLED: Object = Object {
    name: "VoltageSettled",
    meaning: "a condition on settling",
    fields: &[
        must(
            "change",
            Shape::Quantity(Kind::Voltage),
            "the largest change that counts as settled",
        ),
        must("over", TIME, "over how long"),
    ],
    one_of: &[],
};

static TEMPERATURE_SETTLED: Object = Object {
    name: "TemperatureSettled",
    meaning: "a condition on settling",
    fields: &[
        must(
            "change",
            Shape::Quantity(Kind::Temperature),
            "the largest change that counts as settled",
        ),
        must("over", TIME, "over how long"),
    ],
    one_of: &[],
};

static BURST: Object = Object {
    name: "Burst",
    meaning: "a burst",
    fields: &[
        must("before", TIME, "time before the step's beginning"),
        must("after", TIME, "time after it"),
    ],
    one_of: &[],
};
