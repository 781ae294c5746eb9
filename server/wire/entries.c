/* The table of entry types, and the strict composer and parser that it drives. */
#include "server/wire/entries.h"

#include <stdio.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/check.h"
#include "server/base/clock.h"
#include "server/base/text.h"

#define MEMBERS(...)                                                                                                   \
	(const struct wire_member[])                                                                                   \
	{                                                                                                              \
		__VA_ARGS__,                                                                                           \
		{                                                                                                      \
			NULL, WIRE_TEXT                                                                                \
		}                                                                                                      \
	}
#define NO_MEMBERS                                                                                                     \
	(const struct wire_member[])                                                                                   \
	{                                                                                                              \
		{                                                                                                      \
			NULL, WIRE_TEXT                                                                                \
		}                                                                                                      \
	}
#define ADMIN     ROLE_BIT(ROLE_ADMINISTRATOR)
#define CUSTODIAN ROLE_BIT(ROLE_CUSTODIAN)
#define OPERATOR  ROLE_BIT(ROLE_OPERATOR)
#define DRIVER    ROLE_BIT(ROLE_DRIVER)
#define ANALYST   ROLE_BIT(ROLE_ANALYST)
#define REVIEWER  ROLE_BIT(ROLE_REVIEWER)
#define LIAISON   ROLE_BIT(ROLE_LIAISON)
#define SERVICE   ROLE_BIT(ROLE_SERVICE)

static const struct wire_entry_type types[] = {
    {"service-start", SERVICE, false, false, "The service starts its ledger",
     "The service states its key, its administrator's key and its kind of clock",
     MEMBERS({"service_key", WIRE_HEX32}, {"administrator_key", WIRE_HEX32}, {"clock", WIRE_NAME})},
    {"invitation", ADMIN, false, false, "A person or host is invited to a role",
     "The administrator vouches that the named party may enrol in this role with the code behind the hash",
     MEMBERS({"role", WIRE_NAME}, {"name", WIRE_NAME}, {"code_hash", WIRE_HEX64})},
    {"enrolment", ROLES_ENROLLED, false, false, "A party enrols with its keys",
     "The party holds the private halves of these keys and accepts the role",
     MEMBERS({"role", WIRE_NAME}, {"name", WIRE_NAME}, {"signing_key", WIRE_HEX32}, {"exchange_key", WIRE_HEX32},
             {"invitation", WIRE_INT})},
    {"same-person", ADMIN | CUSTODIAN | REVIEWER, false, false, "A party is said to be a certain person",
     "The author knows that the named party is this person, who can be on one side of a campaign only",
     MEMBERS({"name", WIRE_NAME}, {"person", WIRE_NAME})},
    {"key-rotation", ROLES_ENROLLED, false, false, "A party replaces its keys",
     "The party holds the private halves of the new keys, and the old ones count for nothing from here on",
     MEMBERS({"signing_key", WIRE_HEX32}, {"exchange_key", WIRE_HEX32}, {"proof", WIRE_HEX64})},
    {"vouch", CUSTODIAN | REVIEWER | OPERATOR, false, false, "A colleague vouches for the new keys of a party",
     "The author compared the fingerprint of these keys with the person themselves",
     MEMBERS({"name", WIRE_NAME}, {"signing_key", WIRE_HEX32}, {"exchange_key", WIRE_HEX32})},
    {"retirement", ROLES_ENROLLED, false, false, "A party is retired",
     "The keys of the named party count for nothing from here on", MEMBERS({"name", WIRE_NAME})},
    {"plan", ADMIN | CUSTODIAN, false, false, "A campaign is drafted under this plan",
     "The author proposes this plan, which fixes everything before anything is drawn",
     MEMBERS({"nonce", WIRE_HEX16}, {"plan", WIRE_LONG}, {"files", WIRE_FILES})},
    {"deal", CUSTODIAN, false, true, "A custodian deals shares of the group key",
     "The custodian made this message and committed to a contribution to the draw",
     MEMBERS({"attempt", WIRE_INT}, {"message", WIRE_BASE64}, {"contribution_commitment", WIRE_HEX64})},
    {"keygen-failed", CUSTODIAN, false, true, "A key generation attempt is abandoned",
     "The custodian's checks failed on the message of the accused, as the reason says",
     MEMBERS({"attempt", WIRE_INT}, {"accused", WIRE_NAME})},
    {"complaint", CUSTODIAN, false, true, "A custodian complains about a share",
     "The share dealt to the author is false, as anybody can judge by the complaint",
     MEMBERS({"attempt", WIRE_INT}, {"accused", WIRE_NAME}, {"complaint", WIRE_BASE64})},
    {"exclusion", ADMIN | CUSTODIAN, false, true, "A silent custodian is left out of the key generation",
     "The attempt has stood still for three days because the named custodian did not do what is due",
     MEMBERS({"name", WIRE_NAME})},
    {"certify", CUSTODIAN, false, true, "A custodian certifies the group key",
     "The custodian checked every message of this attempt and holds a share of the group key",
     MEMBERS({"attempt", WIRE_INT}, {"certificate", WIRE_HEX64}, {"certificate_signature", WIRE_HEX64})},
    {"canary", SERVICE, false, true, "A canary is sealed for the rehearsal of the opening",
     "The service sealed a random text that all custodians must be able to open",
     MEMBERS({"attempt", WIRE_INT}, {"record", WIRE_BASE64})},
    {"rehearsal", CUSTODIAN, false, true, "A custodian opens the canary", "The custodian's share works",
     MEMBERS({"attempt", WIRE_INT}, {"record_id", WIRE_HEX64}, {"share", WIRE_BASE64})},
    {"rehearsed", SERVICE, false, true, "Every custodian opened the canary",
     "The service combined the openings and found the sealed text", MEMBERS({"attempt", WIRE_INT})},
    {"rehearsal-request", CUSTODIAN, false, true, "A custodian asks for a rehearsal of the opening",
     "A fresh canary shall be sealed, and every custodian shall open it", NO_MEMBERS},
    {"reshare-request", ADMIN | CUSTODIAN, false, true, "The shares are to be dealt on to another set of custodians",
     "The author asks the named dealers and the new set to do their parts",
     MEMBERS({"names", WIRE_NAMES}, {"needed", WIRE_INT}, {"dealers", WIRE_NAMES})},
    {"reshare-deal", CUSTODIAN, false, true, "A custodian deals a share on",
     "The custodian dealt the share in hand to every custodian of the new set",
     MEMBERS({"attempt", WIRE_INT}, {"message", WIRE_BASE64})},
    {"reshare-complaint", CUSTODIAN, false, true, "A custodian complains about a part of a share",
     "The part dealt to the author is false, as anybody can judge by the complaint",
     MEMBERS({"attempt", WIRE_INT}, {"accused", WIRE_NAME}, {"complaint", WIRE_BASE64})},
    {"reshare-failed", ADMIN | CUSTODIAN, false, true, "A resharing attempt is abandoned",
     "Nothing changes: the present custodians stay in office", MEMBERS({"attempt", WIRE_INT})},
    {"reshare-certify", CUSTODIAN, false, true, "A custodian of the new set certifies it",
     "The custodian checked every message of this attempt and holds a share of the same group key",
     MEMBERS({"attempt", WIRE_INT}, {"certificate", WIRE_HEX64}, {"certificate_signature", WIRE_HEX64})},
    {"reshare-canary", SERVICE, false, true, "A canary is sealed for the new set",
     "The service sealed a random text that all new custodians must be able to open",
     MEMBERS({"attempt", WIRE_INT}, {"record", WIRE_BASE64})},
    {"reshare-rehearsal", CUSTODIAN, false, true, "A custodian of the new set opens the canary",
     "The custodian's new share works",
     MEMBERS({"attempt", WIRE_INT}, {"record_id", WIRE_HEX64}, {"share", WIRE_BASE64})},
    {"reshared", SERVICE, false, true, "The new set is in office",
     "Every new custodian opened the canary; from here on the new set opens, and the old one no more",
     MEMBERS({"attempt", WIRE_INT})},
    {"share-erased", CUSTODIAN, false, true, "A custodian states that an old share is erased",
     "The author erased every copy of the share of that epoch that the author had", MEMBERS({"epoch", WIRE_INT})},
    {"repair-request", CUSTODIAN, false, true, "A custodian lost a share and asks for its repair",
     "The author lost the share, not the keys, and asks the named helpers for their parts",
     MEMBERS({"helpers", WIRE_NAMES})},
    {"repair-split", CUSTODIAN, false, true, "A helper splits a part of the repair",
     "The helper split what is needed among the helpers", MEMBERS({"attempt", WIRE_INT}, {"message", WIRE_BASE64})},
    {"repair-sum", CUSTODIAN, false, true, "A helper sends a part of the repair",
     "The helper checked the parts and sends their sum to the one who lost the share",
     MEMBERS({"attempt", WIRE_INT}, {"message", WIRE_BASE64})},
    {"repair-failed", CUSTODIAN, false, true, "A repair is abandoned", "Nothing changes, as the reason says",
     MEMBERS({"attempt", WIRE_INT})},
    {"repaired", CUSTODIAN, false, true, "A lost share is repaired",
     "The author has the share again; it fits the certificate", MEMBERS({"attempt", WIRE_INT})},
    {"prekeys", DRIVER, false, true, "A driver leaves one-time keys for the recipes of its station",
     "The driver holds the private halves and will erase each after its slot",
     MEMBERS({"station", WIRE_NAME}, {"place", WIRE_INT}, {"count", WIRE_INT}, {"points_hash", WIRE_HEX64})},
    {"seal-request", ADMIN, false, true, "The administrator asks for the draw and the sealing",
     "The administrator starts the sealer; nobody sees what it draws", NO_MEMBERS},
    {"sealing", SERVICE, false, true, "A sealer runs and waits for contributions",
     "The sealer made this key inside itself for this one run; the service committed to its contribution",
     MEMBERS({"sealing_attempt", WIRE_INT}, {"sealer_key", WIRE_HEX32}, {"service_commitment", WIRE_HEX64},
             {"host_signature", WIRE_HEX64})},
    {"contribution", CUSTODIAN, false, true, "A custodian delivers a contribution to the draw",
     "The box holds the contribution committed to earlier, encrypted to the sealer",
     MEMBERS({"sealing_attempt", WIRE_INT}, {"box", WIRE_BASE64})},
    {"contribution-commitment", CUSTODIAN, false, true, "A custodian commits to a new contribution",
     "The custodian drew a fresh contribution for this sealing attempt",
     MEMBERS({"sealing_attempt", WIRE_INT}, {"contribution_commitment", WIRE_HEX64})},
    {"sealing-failed", SERVICE, false, true, "A sealing attempt is closed without records",
     "No record of this attempt will be used", MEMBERS({"sealing_attempt", WIRE_INT})},
    {"record", SERVICE, false, true, "A sealed record is fixed",
     "The sealer gave this record and this slot-key commitment",
     MEMBERS({"sealing_attempt", WIRE_INT}, {"slot", WIRE_INT}, {"record_id", WIRE_HEX64},
             {"slot_key_commitment", WIRE_HEX64})},
    {"sealed", SERVICE, false, true, "The campaign is sealed",
     "All records, slot-key commitments and recipes of this sealing attempt are fixed",
     MEMBERS({"sealing_attempt", WIRE_INT}, {"slots", WIRE_INT}, {"recipes_hash", WIRE_HEX64},
             {"host_signature", WIRE_HEX64})},
    {"freeze", SERVICE, false, true, "The readiness of a slot is frozen",
     "These stations were ready, and these go; issued for every slot alike",
     MEMBERS({"slot", WIRE_INT}, {"ready", WIRE_NAMES}, {"going", WIRE_NAMES})},
    {"hold", OPERATOR, false, true, "An operator holds a station",
     "The operator refuses to have the station driven in this stretch",
     MEMBERS({"station", WIRE_NAME}, {"from_gps", WIRE_GPS}, {"to_gps", WIRE_GPS})},
    {"hold-lift", OPERATOR, false, true, "An operator lifts a hold", "The operator takes the hold back",
     MEMBERS({"hold", WIRE_INT})},
    {"stop", OPERATOR, false, true, "An operator stops the drive at once",
     "The operator demands silence until the stop is lifted", MEMBERS({"station", WIRE_NAME})},
    {"stop-lift", OPERATOR, false, true, "An operator lifts a stop", "The operator allows drives again",
     MEMBERS({"stop", WIRE_INT})},
    {"witness-statement", OPERATOR | DRIVER, false, true, "The witness channels of a station are stated",
     "The author looked at the station: these channels, and no others known, could tell live from null there",
     MEMBERS({"station", WIRE_NAME}, {"channels", WIRE_NAMES}, {"masked", WIRE_NAMES})},
    {"segments", OPERATOR | DRIVER, false, true, "Segments of a station are stated",
     "The author states when the station observed, was vetoed or gave usable noise",
     MEMBERS({"station", WIRE_NAME}, {"kind", WIRE_NAME}, {"segments", WIRE_PAIRS})},
    {"play-note", DRIVER, false, true, "A driver files its minute note",
     "The sealed note says what the driver had played by then",
     MEMBERS({"station", WIRE_NAME}, {"slot", WIRE_INT}, {"record_id", WIRE_HEX64})},
    {"play-report", DRIVER, false, true, "A driver files its report of a slot",
     "The sealed report says what the driver did in this slot",
     MEMBERS({"station", WIRE_NAME}, {"slot", WIRE_INT}, {"record_id", WIRE_HEX64})},
    {"claim", ANALYST, true, true, "An analyst submits a sealed claim",
     "The analyst made this claim before knowing any answer",
     MEMBERS({"pipeline", WIRE_NAME}, {"sequence", WIRE_INT}, {"record_id", WIRE_HEX64})},
    {"claim-withdrawal", ANALYST, true, true, "An analyst withdraws a claim",
     "The claim no longer stands; that it was made remains", MEMBERS({"claim", WIRE_HEX16})},
    {"milestone", ANALYST, true, true, "A step of the human response to a claim",
     "The named step was reached when this was filed",
     MEMBERS({"claim", WIRE_HEX16}, {"sequence", WIRE_INT}, {"record_id", WIRE_HEX64})},
    {"guess", OPERATOR | ANALYST, true, true, "Somebody guesses whether a slot is live",
     "The author believed this before the slot started, and knew no more than the role may know",
     MEMBERS({"slot", WIRE_INT}, {"sequence", WIRE_INT}, {"record_id", WIRE_HEX64})},
    {"incident", ROLES_ENROLLED, true, true, "Somebody reports a break of the blind",
     "The author saw or heard what the sealed record says, and tells nobody else before the opening",
     MEMBERS({"sequence", WIRE_INT}, {"record_id", WIRE_HEX64})},
    {"spot-request", REVIEWER | OPERATOR | LIAISON, true, true, "Somebody asks whether an interval holds a drill",
     "The asker needs the answer for the reason given and will tell only the recipients",
     MEMBERS({"from_gps", WIRE_GPS}, {"to_gps", WIRE_GPS}, {"recipients", WIRE_NAMES}, {"deadline_gps", WIRE_GPS})},
    {"closing", REVIEWER, false, true, "The analysis is closed", "No claim, milestone or guess is taken after this",
     NO_MEMBERS},
    {"early-closing", REVIEWER, false, true, "The analysis is closed before the end of the campaign",
     "Nothing more is played, the keys of slots not played are erased, and nothing is taken after this", NO_MEMBERS},
    {"abandonment", ADMIN | REVIEWER, false, true, "The campaign is abandoned",
     "Nothing more is played, the keys of slots not played are erased, and nothing is taken after this", NO_MEMBERS},
    {"hidden-summary", SERVICE, false, true, "All hidden entries of the campaign are fixed",
     "These, and no others, were promised before the closing and stand in the ledger",
     MEMBERS({"count", WIRE_INT}, {"commitments_hash", WIRE_HEX64})},
    {"opening-request", REVIEWER, false, true, "The full opening is asked for",
     "The reviewer asks the custodians to open every record of the campaign",
     MEMBERS({"recipients", WIRE_NAMES}, {"deadline_gps", WIRE_GPS}, {"reveal_gps", WIRE_GPS})},
    {"opening-shares", CUSTODIAN, false, true, "A custodian gives partial openings of every record",
     "The custodian checked the request and every record before opening",
     MEMBERS({"opening", WIRE_HEX16}, {"count", WIRE_INT}, {"shares_hash", WIRE_HEX64})},
    {"spot-shares", CUSTODIAN, true, true, "A custodian gives partial openings to the other custodians",
     "The custodian checked the spot request and the records it touches",
     MEMBERS({"opening", WIRE_HEX16}, {"boxes_hash", WIRE_HEX64})},
    {"spot-answer", CUSTODIAN, true, true, "A custodian answers a spot request",
     "The boxed answer is what the opened records say", MEMBERS({"opening", WIRE_HEX16}, {"box_hash", WIRE_HEX64})},
    {"spot-refusal", CUSTODIAN, true, true, "A custodian refuses a spot request",
     "The custodian gives nothing for this request, for the reason given", MEMBERS({"opening", WIRE_HEX16})},
    {"spot-retraction", CUSTODIAN, true, true, "A custodian signs a retraction",
     "What was said about the interval, or sent out about it, is to be withdrawn, as the boxed statement says",
     MEMBERS({"opening", WIRE_HEX16}, {"box_hash", WIRE_HEX64})},
    {"opening-refusal", CUSTODIAN, false, true, "A custodian refuses the full opening",
     "The custodian gives nothing for this request, for the reason given", MEMBERS({"opening", WIRE_HEX16})},
    {"opened", SERVICE, false, true, "The campaign is opened", "The service combined and decrypted every record",
     MEMBERS({"opening", WIRE_HEX16}, {"plaintexts_hash", WIRE_HEX64})},
    {"audit-signature", REVIEWER, false, true, "A reviewer signs the audit",
     "The reviewer read the audit with this hash and agrees that it be the result",
     MEMBERS({"audit_hash", WIRE_HEX64})},
};
#define N_TYPES ((int)(sizeof types / sizeof types[0]))

static const char *const common_keys[] = {"type", "campaign", "by",      "when_gps", "when_utc",
                                          "what", "why",      "meaning", NULL};

const struct wire_entry_type *wire_entry_types(int *n)
{
	*n = N_TYPES;
	return types;
}

const struct wire_entry_type *wire_entry_type(const char *type)
{
	for (int i = 0; i < N_TYPES; i++) {
		if (strcmp(types[i].type, type) == 0)
			return &types[i];
	}
	return NULL;
}

static bool is_hex(const char *s, size_t n)
{
	return strlen(s) == 2 * n && strspn(s, "0123456789abcdef") == 2 * n;
}

static bool is_base64(const char *s)
{
	struct buf b = {0};
	bool good = base64_decode(s, &b);
	buf_free(&b);
	return good;
}

static bool is_gps(const json_t *v)
{
	int64_t ns;
	return json_is_string(v) && clock_gps_parse(json_string_value(v), &ns);
}

static bool is_names(const json_t *v)
{
	size_t i;
	json_t *m;
	if (!json_is_array(v) || json_array_size(v) > 64)
		return false;
	json_array_foreach(v, i, m)
	{
		if (!json_is_string(m) || !text_is_name(json_string_value(m)))
			return false;
	}
	return true;
}

static bool is_pairs(const json_t *v)
{
	size_t i;
	json_t *m;
	if (!json_is_array(v) || json_array_size(v) > 100000)
		return false;
	json_array_foreach(v, i, m)
	{
		if (!json_is_array(m) || json_array_size(m) != 2 || !is_gps(json_array_get(m, 0)) ||
		    !is_gps(json_array_get(m, 1)))
			return false;
	}
	return true;
}

static bool is_files(const json_t *v)
{
	const char *key;
	json_t *m;
	if (!json_is_object(v) || json_object_size(v) > 64)
		return false;
	json_object_foreach((json_t *)v, key, m)
	{
		if (!json_is_string(m) || !text_is_line(key, 200))
			return false;
	}
	return true;
}

static bool member_fits(enum wire_member_kind kind, const json_t *v)
{
	const char *s = json_string_value(v); /* NULL unless it is a string */
	switch (kind) {
	case WIRE_TEXT:
		return s != NULL && text_is_line(s, 4000);
	case WIRE_LONG:
		return s != NULL && text_is_utf8(s, strlen(s));
	case WIRE_NAME:
		return s != NULL && text_is_name(s);
	case WIRE_INT:
		return json_is_integer(v) && json_integer_value(v) >= -1 && json_integer_value(v) <= INT64_C(1) << 53;
	case WIRE_GPS:
		return is_gps(v);
	case WIRE_HEX16:
		return s != NULL && is_hex(s, 16);
	case WIRE_HEX32:
		return s != NULL && is_hex(s, 32);
	case WIRE_HEX64:
		return s != NULL && is_hex(s, 64);
	case WIRE_HEX96:
		return s != NULL && is_hex(s, 96);
	case WIRE_BASE64:
		return s != NULL && is_base64(s);
	case WIRE_NAMES:
		return is_names(v);
	case WIRE_PAIRS:
		return is_pairs(v);
	case WIRE_FILES:
		return is_files(v);
	}
	return false;
}

/* Every member of the type, each of its kind. `common`: members beyond the type's that obj may have. */
static enum qb_status check_members(const struct wire_entry_type *type, const json_t *obj, const char *const *common,
                                    struct qb_error *e)
{
	size_t want = 0;
	char where[120];
	for (const struct wire_member *m = type->members; m->key != NULL; m++, want++) {
		const json_t *v = json_object_get(obj, m->key);
		(void)snprintf(where, sizeof where, "ledger entry '%s': %s", type->type, m->key);
		if (v == NULL)
			return qb_fail(e, QB_FORMAT, where, "add it", "is missing");
		if (!member_fits(m->kind, v))
			return qb_fail(e, QB_FORMAT, where, "see docs/protocol.md", "does not have the form required");
	}
	for (int i = 0; common != NULL && common[i] != NULL; i++)
		want += json_object_get(obj, common[i]) != NULL;
	if (json_object_size(obj) != want) {
		(void)snprintf(where, sizeof where, "ledger entry '%s'", type->type);
		return qb_fail(e, QB_FORMAT, where, "remove it", "has a member that does not belong there");
	}
	return QB_OK;
}

enum qb_status wire_entry_compose(const char *type, const char *by, const uint8_t *campaign, int64_t now_gps_ns,
                                  const char *why, const json_t *extra, char **out, struct qb_error *e)
{
	const struct wire_entry_type *t = wire_entry_type(type);
	CHECK(t != NULL && t->needs_campaign == (campaign != NULL));
	*out = NULL;
	json_t *empty = json_object();
	enum qb_status st = check_members(t, extra != NULL ? extra : empty, NULL, e);
	json_decref(empty);
	if (st != QB_OK)
		return st;
	char utc[40];
	json_t *doc = json_object();
	json_object_set_new(doc, "type", json_string(type));
	if (campaign != NULL)
		json_object_set_new(doc, "campaign", json_hex_new(campaign, 16));
	json_object_set_new(doc, "by", json_string(by));
	json_object_set_new(doc, "when_gps", json_gps_new(now_gps_ns));
	json_object_set_new(doc, "when_utc", json_string(clock_utc_text(now_gps_ns, utc, sizeof utc)));
	json_object_set_new(doc, "what", json_string(t->what));
	json_object_set_new(doc, "why", json_string(*why != '\0' ? why : "-"));
	json_object_set_new(doc, "meaning", json_string(t->meaning));
	if (extra != NULL)
		json_object_update(doc, (json_t *)extra);
	*out = json_text(doc);
	json_decref(doc);
	return QB_OK;
}

static enum qb_status parse_common(struct wire_entry *out, struct qb_error *e)
{
	const char *type, *what, *meaning, *utc;
	char where[] = "ledger entry";
	int64_t utc_ns;
	enum qb_status st;
	if ((st = json_str(out->doc, "type", where, &type, e)) != QB_OK)
		return st;
	out->type = wire_entry_type(type);
	if (out->type == NULL)
		return qb_fail(e, QB_FORMAT, where, NULL, "has the unknown type '%.40s'", type);
	if ((st = check_members(out->type, out->doc, common_keys, e)) != QB_OK ||
	    (st = json_str(out->doc, "by", where, &out->by, e)) != QB_OK ||
	    (st = json_str(out->doc, "why", where, &out->why, e)) != QB_OK ||
	    (st = json_str(out->doc, "what", where, &what, e)) != QB_OK ||
	    (st = json_str(out->doc, "meaning", where, &meaning, e)) != QB_OK ||
	    (st = json_str(out->doc, "when_utc", where, &utc, e)) != QB_OK ||
	    (st = json_gps(out->doc, "when_gps", where, &out->when_gps_ns, e)) != QB_OK)
		return st;
	if (!text_is_name(out->by) || !text_is_line(out->why, 2000))
		return qb_fail(e, QB_FORMAT, where, "give a one-line reason",
		               "'by' or 'why' does not have the form required");
	if (strcmp(what, out->type->what) != 0 || strcmp(meaning, out->type->meaning) != 0)
		return qb_fail(e, QB_FORMAT, where, "use the sentences of this version",
		               "'what' or 'meaning' is not the fixed sentence of the type '%s'", type);
	if (!clock_utc_parse(utc, &utc_ns) || utc_ns != out->when_gps_ns)
		return qb_fail(e, QB_FORMAT, where, NULL, "when_utc and when_gps are not the same instant");
	out->has_campaign = json_object_get(out->doc, "campaign") != NULL;
	if (out->has_campaign != out->type->needs_campaign)
		return qb_fail(e, QB_FORMAT, where, NULL, "'campaign' is %s",
		               out->has_campaign ? "out of place" : "missing");
	return out->has_campaign ? json_hex(out->doc, "campaign", where, out->campaign, 16, e) : QB_OK;
}

enum qb_status wire_entry_parse(const char *text, size_t n, struct wire_entry *out, struct qb_error *e)
{
	*out = (struct wire_entry){0};
	enum qb_status st = json_read(text, n, "ledger entry", &out->doc, e);
	if (st == QB_OK)
		st = parse_common(out, e);
	if (st != QB_OK)
		wire_entry_free(out);
	return st;
}

void wire_entry_free(struct wire_entry *entry)
{
	json_decref(entry->doc);
	*entry = (struct wire_entry){0};
}

const char *wire_entry_text(const struct wire_entry *entry, const char *key)
{
	const char *s = json_string_value(json_object_get(entry->doc, key));
	CHECK(s != NULL);
	return s;
}

int64_t wire_entry_int(const struct wire_entry *entry, const char *key)
{
	const json_t *v = json_object_get(entry->doc, key);
	CHECK(json_is_integer(v));
	return json_integer_value(v);
}

int64_t wire_entry_gps(const struct wire_entry *entry, const char *key)
{
	int64_t ns;
	CHECK(clock_gps_parse(wire_entry_text(entry, key), &ns));
	return ns;
}

void wire_entry_hex(const struct wire_entry *entry, const char *key, uint8_t *out, size_t n)
{
	const char *s = wire_entry_text(entry, key);
	CHECK(strlen(s) == 2 * n && hex_decode(out, n, s));
}

const json_t *wire_entry_json(const struct wire_entry *entry, const char *key)
{
	const json_t *v = json_object_get(entry->doc, key);
	CHECK(v != NULL);
	return v;
}
