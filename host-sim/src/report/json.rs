//! One JSON document per run, for machines.
//!
//! Contract: the layout is [`super::figures::Document`], `schema` says which
//! version. Numbers that are not finite become `null`, as JSON has none.

use super::figures::document as gather;
use super::{Bundle, ReportError};

/// The document as text, ending with a newline.
///
/// Errors: [`ReportError::Layout`] if the library refuses (it has no reason to).
pub fn document(bundle: &Bundle) -> Result<String, ReportError> {
    serde_json::to_string_pretty(&gather(bundle))
        .map(|text| text + "\n")
        .map_err(|e| ReportError::Layout { what: "result.json", why: e.to_string() })
}
