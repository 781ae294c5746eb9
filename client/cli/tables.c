/* The list of the client's tables of verbs. */
#include <stddef.h>

#include "client/cli/internal.h"

const struct cli_verb *const cli_tables[] = {
    cli_key_verbs,      cli_party_verbs,   cli_plan_verbs,  cli_campaign_verbs, cli_slot_verbs,
    cli_segments_verbs, cli_service_verbs, cli_claim_verbs, cli_incident_verbs, cli_opening_verbs,
    cli_ledger_verbs,   cli_bundle_verbs,  cli_rig_verbs,   cli_scan_verbs,     cli_drive_verbs,
    cli_audit_verbs,    cli_report_verbs,  cli_wave_verbs,  cli_reach_verbs,    NULL};
