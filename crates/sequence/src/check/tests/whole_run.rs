//! The whole run: charge, limits, certificate, disk.

use quantity::Resistance;
use serde_json::json;

use super::{Bed, Case, case};
use crate::calibration::Calibration;
use crate::rule::Rule;

pub(super) const CASES: &[Case] = &[
    case(
        // 3.2 Ah at 1 A is 192 min.
        Rule::ChargeAboveRated,
        |bed| bed.step(json!({ "draw": "1 A", "for": "193 min" })),
        |bed| bed.step(json!({ "draw": "1 A", "for": "192 min" })),
    ),
    case(
        // 10 min, 7 h and 1 min.
        Rule::LimitOutOfReach,
        |bed| bed.interlock("time", json!("431 min")),
        |bed| bed.interlock("time", json!("430 min")),
    ),
    case(
        // A cell of 3.2 Ah at 0,2 It: 5 h, with 11 min of rest.
        Rule::LimitBeforeEnd,
        |bed| bed.interlock("time", json!("310 min")),
        |bed| bed.interlock("time", json!("311 min")),
    ),
    case(
        Rule::LimitBeforeEnd,
        |bed| bed.interlock("charge", json!("3.1999 Ah")),
        |bed| bed.interlock("charge", json!("3.2 Ah")),
    ),
    case(
        // From 2.75 V down to 2.5 V is as much as 640 mA lose in 390.625 mohm.
        Rule::LeadsTripEarly,
        |bed| bed.facts.correction.leads = Resistance::from_microohms(390_626),
        |bed| bed.facts.correction.leads = Resistance::from_microohms(390_625),
    ),
    case(
        // A step with no ending on the voltage: a hundredth of 4.2 V.
        Rule::LeadsTripEarly,
        |bed| {
            bed.sequence["steps"][1] = json!({ "draw": "500 mA", "for": "1 h" });
            bed.facts.correction.leads = Resistance::from_microohms(84_002);
        },
        |bed| {
            bed.sequence["steps"][1] = json!({ "draw": "500 mA", "for": "1 h" });
            bed.facts.correction.leads = Resistance::from_microohms(84_000);
        },
    ),
    case(
        // 2 W at 2.75 V are 727 mA.
        Rule::LeadsTripEarly,
        |bed| {
            hold_power(bed);
            bed.facts.correction.leads = Resistance::from_microohms(343_760);
        },
        |bed| {
            hold_power(bed);
            bed.facts.correction.leads = Resistance::from_microohms(343_740);
        },
    ),
    case(
        Rule::CertificateExpires,
        |bed| bed.calibrated(431 * 60 - 1, [1, 3_000_000], [1_000_000, 5_000_000]),
        |bed| bed.calibrated(431 * 60, [1, 3_000_000], [1_000_000, 5_000_000]),
    ),
    case(
        Rule::CertificateAbsent,
        |bed| bed.options.calibration = Calibration::Absent,
        |bed| bed.calibrated(431 * 60, [1, 3_000_000], [1_000_000, 5_000_000]),
    ),
    case(
        // 0,2 It of 3.2 Ah is 640 mA.
        Rule::BeyondCalibration,
        |bed| bed.calibrated(431 * 60, [1, 639_999], [1_000_000, 5_000_000]),
        |bed| bed.calibrated(431 * 60, [640_000, 640_000], [1_000_000, 5_000_000]),
    ),
    case(
        Rule::BeyondCalibration,
        |bed| bed.calibrated(431 * 60, [1, 3_000_000], [2_500_001, 5_000_000]),
        |bed| bed.calibrated(431 * 60, [1, 3_000_000], [2_500_000, 4_200_000]),
    ),
    case(
        Rule::BeyondCalibration,
        |bed| bed.calibrated(431 * 60, [1, 3_000_000], None),
        |bed| bed.calibrated(431 * 60, [1, 3_000_000], [2_500_000, 4_200_000]),
    ),
    case(
        // 431 min of five readbacks a second, 400 bytes each: 51.72 MB.
        Rule::DiskSpace,
        |bed| bed.options.disk_free_bytes = Some(51_719_999),
        |bed| bed.options.disk_free_bytes = Some(51_720_000),
    ),
    case(
        Rule::RecordLarge,
        |bed| bed.options.disk_free_bytes = Some(103_439_998),
        |bed| bed.options.disk_free_bytes = Some(103_440_000),
    ),
];

/// 2 W to the cut-off.
fn hold_power(bed: &mut Bed) {
    let step = &mut bed.sequence["steps"][1];
    step.as_object_mut().unwrap().remove("draw");
    step["draw_power"] = json!("2 W");
}
