/* Look-ups in the projection. */
#include <stdio.h>
#include <string.h>

#include "server/base/text.h"
#include "server/ops/internal.h"

struct campaign *campaign_find(struct ops *o, const char *name_or_id)
{
	uint8_t id[16];
	bool is_id = strlen(name_or_id) == 32 && hex_decode(id, 16, name_or_id);
	for (int i = 0; i < o->n_campaigns; i++) {
		struct campaign *c = o->campaign[i];
		if (is_id ? memcmp(c->id, id, 16) == 0 : strcmp(c->name, name_or_id) == 0)
			return c;
	}
	return NULL;
}

const struct ops_party *party_named(const struct ops *o, const char *name)
{
	for (int i = 0; i < o->n_parties; i++) {
		if (strcmp(o->party[i]->name, name) == 0)
			return o->party[i];
	}
	return NULL;
}

const struct ops_party *party_by_id(const struct ops *o, const uint8_t key_id[static 16])
{
	for (int i = 0; i < o->n_parties; i++) {
		if (memcmp(o->party[i]->key_id, key_id, 16) == 0)
			return o->party[i];
	}
	return NULL;
}

int custodian_index(const struct campaign *c, const char *name)
{
	for (int i = 0; i < c->n; i++) {
		if (strcmp(c->custodian[i].party->name, name) == 0)
			return i;
	}
	return -1;
}

int station_of_driver(const struct campaign *c, const char *name)
{
	const struct plan_person *p;
	for (int i = 0; (p = plan_person(c->plan, DUTY_DRIVER, i)) != NULL; i++) {
		if (strcmp(p->name, name) == 0)
			return plan_station(c->plan, p->of);
	}
	return -1;
}

struct opening *opening_find(struct campaign *c, const char *id_hex)
{
	uint8_t id[16];
	if (strlen(id_hex) != 32 || !hex_decode(id, 16, id_hex))
		return NULL;
	for (int i = 0; i < c->n_openings; i++) {
		if (memcmp(c->opening[i].id, id, 16) == 0)
			return &c->opening[i];
	}
	return NULL;
}

enum wire_role campaign_role(const struct campaign *c, const struct ops_party *p)
{
	static const enum wire_role of_duty[DUTIES] = {
	    [DUTY_CUSTODIAN] = ROLE_CUSTODIAN, [DUTY_REVIEWER] = ROLE_REVIEWER, [DUTY_OPERATOR] = ROLE_OPERATOR,
	    [DUTY_LIAISON] = ROLE_LIAISON,     [DUTY_DRIVER] = ROLE_DRIVER,     [DUTY_ANALYST] = ROLE_ANALYST};
	if (p->role == ROLE_ADMINISTRATOR || p->role == ROLE_AUDITOR)
		return p->role;
	const struct plan_person *person = plan_person_named(c->plan, p->name);
	if (person == NULL || of_duty[person->duty] != p->role)
		return ROLE_NONE;
	return p->role;
}

enum qb_status slot_number(const struct campaign *c, const char *text, int64_t *out, struct qb_error *e)
{
	if (!text_i64(text, out) || *out < 0 || *out >= c->n_slots)
		return qb_fail(e, QB_NOT_FOUND, "slot", "see quietbell slot list", "the campaign has no slot '%.20s'",
		               text);
	return QB_OK;
}

bool query_int(const char *query, const char *key, int64_t min, int64_t max, int64_t otherwise, int64_t *out)
{
	size_t n = strlen(key);
	*out = otherwise;
	for (const char *p = query; *p != '\0';) {
		size_t len = strcspn(p, "&");
		if (len > n + 1 && len < n + 22 && strncmp(p, key, n) == 0 && p[n] == '=') {
			char number[24];
			(void)snprintf(number, sizeof number, "%.*s", (int)(len - n - 1), p + n + 1);
			return text_i64(number, out) && *out >= min && *out <= max;
		}
		p += len + (p[len] == '&');
	}
	return true;
}

const char *campaign_state_word(enum campaign_state s)
{
	static const char *const words[] = {"drafted", "certified", "rehearsed", "sealing",
	                                    "sealed",  "closed",    "opened"};
	return words[s];
}

int64_t now_locked(struct ops *o)
{
	return o->rehearsal_clock ? o->rehearsal_now_ns : clock_now(&o->settings.system);
}
