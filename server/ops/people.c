/* Keys and persons over time: who may replace, vouch for or retire which keys, and who counts as one person. */
#include <string.h>

#include "server/ops/internal.h"

static enum qb_status check_rotation(struct ops *o, const struct ops_call *call, const struct accepted *a,
                                     struct qb_error *e)
{
	struct party_public fresh;
	uint8_t id[16], statement[64], proof[64];
	const struct view_party *p = view_party_named(&o->view, call->who->name);
	wire_entry_hex(&a->entry, "signing_key", fresh.sign, 32);
	wire_entry_hex(&a->entry, "exchange_key", fresh.exchange, 32);
	wire_entry_hex(&a->entry, "proof", proof, 64);
	enum qb_status st = party_public_check(&fresh, call->who->name, e);
	if (st != QB_OK)
		return st;
	sign_key_id(fresh.sign, id);
	if (p == NULL || view_party_by_id(&o->view, id) != NULL)
		return qb_fail(e, QB_CONFLICT, "key-rotation: signing_key", "make new keys",
		               "is, or was, enrolled already");
	if (p->n_past == VIEW_KEYS_MAX)
		return qb_fail(e, QB_CONFLICT, "key-rotation", "enrol under a new name",
		               "%s replaced keys %d times already", p->name, VIEW_KEYS_MAX);
	if (view_keys_in_use(&o->view, p))
		return qb_fail(e, QB_CONFLICT, "key-rotation", "let the key generation end first",
		               "a key generation under way uses the keys of %s", p->name);
	view_rotation_statement(p->key_id, &fresh, statement);
	if (!sign_verify(fresh.sign, statement, sizeof statement, proof))
		return qb_fail(e, QB_CRYPTO, "key-rotation: proof", NULL, "is not the new key's over this rotation");
	return QB_OK;
}

static enum qb_status check_vouch(struct ops *o, const struct ops_call *call, const struct accepted *a,
                                  struct qb_error *e)
{
	const char *name = wire_entry_text(&a->entry, "name");
	uint8_t sign[32], exchange[32];
	enum qb_status st = view_may_vouch(&o->view, call->who->name, name, e);
	if (st != QB_OK)
		return st;
	const struct view_party *p = view_party_named(&o->view, name);
	wire_entry_hex(&a->entry, "signing_key", sign, 32);
	wire_entry_hex(&a->entry, "exchange_key", exchange, 32);
	if (memcmp(sign, p->pending.signing_key, 32) != 0 || memcmp(exchange, p->pending.exchange_key, 32) != 0)
		return qb_fail(e, QB_CONFLICT, "vouch", "compare the fingerprint again",
		               "other keys of %s wait for vouches", name);
	if (view_keys_in_use(&o->view, p))
		return qb_fail(e, QB_CONFLICT, "vouch", "let the key generation end first",
		               "the keys of %s can't be replaced now", name);
	return QB_OK;
}

static enum qb_status check_retirement(struct ops *o, const struct ops_call *call, const struct accepted *a,
                                       struct qb_error *e)
{
	const char *name = wire_entry_text(&a->entry, "name");
	const struct view_party *p = view_party_named(&o->view, name);
	if (call->who->role != ROLE_ADMINISTRATOR && strcmp(call->who->name, name) != 0)
		return qb_fail(e, QB_REFUSED, "retirement", "ask the administrator",
		               "a %s retires nobody but themselves", wire_role_word(call->who->role));
	if (p == NULL)
		return qb_fail(e, QB_NOT_FOUND, "retirement: name", "see quietbell party list", "'%s' is not enrolled",
		               name);
	if (p->role == ROLE_ADMINISTRATOR)
		return qb_fail(e, QB_REFUSED, "retirement: name", "rotate the key instead",
		               "the administrator can't be retired");
	if (p->retired)
		return qb_fail(e, QB_CONFLICT, "retirement: name", NULL, "'%s' is retired already", name);
	return QB_OK;
}

/*
 * A link is said once and stays. It counts when somebody is drafted into a campaign or joins one; a link that comes to
 * light later silences nobody, since that would let its author shut others out, but everybody sees the conflict.
 */
static enum qb_status check_same_person(struct ops *o, const struct accepted *a, struct qb_error *e)
{
	const char *name = wire_entry_text(&a->entry, "name"), *person = wire_entry_text(&a->entry, "person");
	const struct view_party *p = view_party_named(&o->view, name);
	if (p == NULL)
		return qb_fail(e, QB_NOT_FOUND, "same-person: name", "see quietbell party list", "'%s' is not enrolled",
		               name);
	if (strcmp(p->person, p->name) != 0)
		return qb_fail(e, QB_CONFLICT, "same-person: name", NULL, "'%s' is said to be '%s' already", name,
		               p->person);
	if (strcmp(name, person) == 0)
		return qb_fail(e, QB_REFUSED, "same-person: person", "name somebody else", "is the party itself");
	return QB_OK;
}

enum qb_status people_check(struct ops *o, const struct ops_call *call, const struct accepted *a, struct qb_error *e)
{
	const char *type = a->entry.type->type;
	if (strcmp(type, "key-rotation") == 0)
		return check_rotation(o, call, a, e);
	if (strcmp(type, "vouch") == 0)
		return check_vouch(o, call, a, e);
	if (strcmp(type, "retirement") == 0)
		return check_retirement(o, call, a, e);
	return check_same_person(o, a, e);
}

enum qb_status people_check_plan(const struct ops *o, const struct drill_plan *plan, struct qb_error *e)
{
	for (int i = 0; i < plan->n_people; i++) {
		const struct view_party *p = view_party_named(&o->view, plan->person[i].name);
		for (int j = 0; j < i; j++) {
			const struct view_party *q = view_party_named(&o->view, plan->person[j].name);
			if (view_one_person(p, q))
				return qb_fail(e, QB_REFUSED, "plan: parties",
				               "one person, one side: name somebody else for one of them",
				               "%s '%s' and %s '%s' are one person",
				               plan_duty_word(plan->person[j].duty), q->name,
				               plan_duty_word(plan->person[i].duty), p->name);
		}
	}
	return QB_OK;
}
