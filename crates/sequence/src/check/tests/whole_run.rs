//! The whole run: charge, limits, certificate, disk.

use serde_json::json;

use super::{Case, case};
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
