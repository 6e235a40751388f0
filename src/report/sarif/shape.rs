//! The objects of a SARIF log, as far as they are used here: names and meaning are those of the standard, whose sections stand
//! beside them. What is absent is left out.

use crate::report::json::SummaryShape;
use serde::Serialize;
use std::collections::BTreeMap;

/// 3.13
#[derive(Serialize)]
pub(super) struct Log<'r> {
    #[serde(rename = "$schema")]
    pub(super) schema: &'static str,
    pub(super) version: &'static str,
    pub(super) runs: [Run<'r>; 1],
}

/// 3.14
#[derive(Serialize)]
#[serde(rename_all = "camelCase")]
pub(super) struct Run<'r> {
    pub(super) tool: Tool<'r>,
    pub(super) invocations: [Invocation<'r>; 1],
    pub(super) original_uri_base_ids: BTreeMap<&'static str, BaseId>,
    pub(super) column_kind: &'static str,
    pub(super) results: Vec<Outcome<'r>>,
    pub(super) properties: RunProperties<'r>,
}

#[derive(Serialize)]
pub(super) struct BaseId {
    pub(super) description: Message,
}

#[derive(Serialize)]
#[serde(rename_all = "camelCase")]
pub(super) struct RunProperties<'r> {
    pub(super) summary: SummaryShape<'r>,
    pub(super) caution: &'static str,
}

/// 3.18
#[derive(Serialize)]
pub(super) struct Tool<'r> {
    pub(super) driver: Driver<'r>,
}

/// 3.19
#[derive(Serialize)]
#[serde(rename_all = "camelCase")]
pub(super) struct Driver<'r> {
    pub(super) name: &'static str,
    pub(super) version: &'static str,
    pub(super) semantic_version: &'static str,
    pub(super) short_description: Text,
    pub(super) rules: Vec<Rule<'r>>,
    pub(super) notifications: Vec<Rule<'r>>,
}

/// 3.49
#[derive(Serialize)]
#[serde(rename_all = "camelCase")]
pub(super) struct Rule<'r> {
    pub(super) id: &'r str,
    pub(super) short_description: Text,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub(super) full_description: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub(super) help: Option<Text>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub(super) default_configuration: Option<Configuration>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub(super) properties: Option<RuleProperties<'r>>,
}

/// 3.50
#[derive(Serialize)]
pub(super) struct Configuration {
    pub(super) level: &'static str,
}

#[derive(Serialize)]
pub(super) struct RuleProperties<'r> {
    #[serde(rename = "for")]
    pub(super) about: &'static str,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub(super) cite: Option<&'r str>,
}

/// 3.12
#[derive(Serialize)]
pub(super) struct Text {
    pub(super) text: String,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub(super) markdown: Option<String>,
}

/// 3.11
#[derive(Serialize)]
pub(super) struct Message {
    pub(super) text: String,
}

/// 3.20
#[derive(Serialize)]
#[serde(rename_all = "camelCase")]
pub(super) struct Invocation<'r> {
    pub(super) execution_successful: bool,
    pub(super) exit_code: u8,
    pub(super) exit_code_description: &'static str,
    pub(super) tool_configuration_notifications: Vec<Notification<'r>>,
    pub(super) tool_execution_notifications: Vec<Notification<'r>>,
}

/// 3.58
#[derive(Serialize)]
pub(super) struct Notification<'r> {
    pub(super) descriptor: Descriptor<'r>,
    pub(super) level: &'static str,
    pub(super) message: Message,
    #[serde(skip_serializing_if = "Vec::is_empty")]
    pub(super) locations: Vec<Location<'r>>,
}

/// 3.52
#[derive(Serialize)]
pub(super) struct Descriptor<'r> {
    pub(super) id: &'r str,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub(super) index: Option<usize>,
}

/// 3.27, a result; named so that it is not taken for Rust's.
#[derive(Serialize)]
#[serde(rename_all = "camelCase")]
pub(super) struct Outcome<'r> {
    pub(super) rule_id: &'r str,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub(super) rule_index: Option<usize>,
    pub(super) kind: &'static str,
    pub(super) level: &'static str,
    pub(super) message: Message,
    pub(super) locations: Vec<Location<'r>>,
    #[serde(skip_serializing_if = "Vec::is_empty")]
    pub(super) related_locations: Vec<Location<'r>>,
    #[serde(skip_serializing_if = "Vec::is_empty")]
    pub(super) code_flows: Vec<CodeFlow<'r>>,
    pub(super) partial_fingerprints: BTreeMap<&'static str, &'r str>,
    #[serde(skip_serializing_if = "Vec::is_empty")]
    pub(super) suppressions: Vec<Suppression<'r>>,
    pub(super) properties: OutcomeProperties<'r>,
}

#[derive(Serialize)]
pub(super) struct OutcomeProperties<'r> {
    pub(super) verdict: &'static str,
    pub(super) severity: &'static str,
    pub(super) instances: u64,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub(super) mode: Option<&'r str>,
    #[serde(skip_serializing_if = "<[String]>::is_empty")]
    pub(super) modes: &'r [String],
    #[serde(skip_serializing_if = "<[String]>::is_empty")]
    pub(super) pairs: &'r [String],
    #[serde(skip_serializing_if = "BTreeMap::is_empty")]
    pub(super) nets: BTreeMap<&'r str, &'r str>,
}

/// 3.28
#[derive(Serialize)]
#[serde(rename_all = "camelCase")]
pub(super) struct Location<'r> {
    #[serde(skip_serializing_if = "Option::is_none")]
    pub(super) id: Option<usize>,
    pub(super) physical_location: Physical,
    #[serde(skip_serializing_if = "Vec::is_empty")]
    pub(super) logical_locations: Vec<Logical<'r>>,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub(super) message: Option<Message>,
}

/// 3.29
#[derive(Serialize)]
#[serde(rename_all = "camelCase")]
pub(super) struct Physical {
    pub(super) artifact_location: Artifact,
    pub(super) region: Region,
}

/// 3.4
#[derive(Serialize)]
#[serde(rename_all = "camelCase")]
pub(super) struct Artifact {
    pub(super) uri: String,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub(super) uri_base_id: Option<&'static str>,
}

/// 3.30
#[derive(Serialize)]
#[serde(rename_all = "camelCase")]
pub(super) struct Region {
    pub(super) start_line: u32,
    pub(super) start_column: u32,
    pub(super) end_line: u32,
    pub(super) end_column: u32,
}

/// 3.33
#[derive(Serialize)]
#[serde(rename_all = "camelCase")]
pub(super) struct Logical<'r> {
    pub(super) name: &'r str,
    pub(super) fully_qualified_name: String,
    pub(super) kind: &'static str,
}

/// 3.36
#[derive(Serialize)]
#[serde(rename_all = "camelCase")]
pub(super) struct CodeFlow<'r> {
    pub(super) message: Message,
    pub(super) thread_flows: [ThreadFlow<'r>; 1],
}

/// 3.37
#[derive(Serialize)]
pub(super) struct ThreadFlow<'r> {
    pub(super) locations: Vec<Step<'r>>,
}

/// 3.38
#[derive(Serialize)]
pub(super) struct Step<'r> {
    pub(super) location: Location<'r>,
}

/// 3.35
#[derive(Serialize)]
pub(super) struct Suppression<'r> {
    pub(super) kind: &'static str,
    pub(super) status: &'static str,
    pub(super) justification: String,
    #[serde(skip_serializing_if = "Option::is_none")]
    pub(super) location: Option<Location<'r>>,
}
