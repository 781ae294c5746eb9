/*
 * From contributions to randomness: commitments, the draw seed, and everything that follows from it. One slot's secrets
 * give neither the seed nor another slot's, since every step is a hash under a label of its own.
 */
#ifndef QB_CUSTODY_SEED_H
#define QB_CUSTODY_SEED_H

#include "server/custody/keygen.h"
#include "server/custody/recipe.h"

#define CONTRIBUTION_BYTES 32
#define SEED_BYTES         64
#define TRUTH_SEED_BYTES   32

/* T("quietbell/1/seal/contribution", ctx, sealing attempt, who, contribution); who is 0 for the service, else 1..n. */
void seed_commit(const uint8_t ctx[static 64], uint64_t sealing_attempt, uint64_t who,
                 const uint8_t contribution[static CONTRIBUTION_BYTES], uint8_t out[static 64]);
bool seed_commit_matches(const uint8_t ctx[static 64], uint64_t sealing_attempt, uint64_t who,
                         const uint8_t contribution[static CONTRIBUTION_BYTES], const uint8_t commitment[static 64]);

/* contribution[0] is the service's, contribution[j] custodian j's: n + 1 of them. The caller frees the 64-byte seed. */
struct secret *seed_draw(const uint8_t ctx[static 64], uint64_t sealing_attempt, uint64_t first_slot,
                         const uint8_t (*contribution)[CONTRIBUTION_BYTES], uint32_t n);

/* Secrets of one slot, each under its own label. Callers wipe the outputs. */
void seed_slot_truth(const struct secret *seed, uint64_t slot, uint8_t truth[static TRUTH_SEED_BYTES]);
void seed_slot_scalar(const struct secret *seed, uint64_t slot, uint8_t r[static SCALAR_BYTES]);
void seed_slot_key(const struct secret *seed, uint64_t slot, uint8_t key[static SLOT_KEY_BYTES]);
void seed_recipe_scalar(const struct secret *seed, const struct recipe_address *at,
                        uint8_t scalar[static SCALAR_BYTES]);
/* The campaign's own draw (empty by design or not): used like a slot's truth bytes. */
void seed_campaign_truth(const struct secret *seed, uint8_t truth[static TRUTH_SEED_BYTES]);
/* r of the seed record itself. */
void seed_record_scalar(const struct secret *seed, uint8_t r[static SCALAR_BYTES]);

/* The m-th uniform variate in (0,1) of a slot: first 8 bytes of T("quietbell/1/draw/uniform", truth bytes, m), mapped.
 */
double seed_uniform(const uint8_t truth[static TRUTH_SEED_BYTES], uint64_t m);

/*
 * What a sealer states about a run, for the host it runs on to sign: its key before anything is sent to it, and its
 * output at the end.
 *
 * T("quietbell/1/seal/key", ctx, sealing attempt, sealer point) and T("quietbell/1/seal/output", ctx, sealing attempt,
 * sealer point, then each record's id and slot-key commitment in their order, hash of all recipes).
 */
void seal_key_statement(const uint8_t ctx[static 64], uint64_t sealing_attempt, const uint8_t point[static POINT_BYTES],
                        uint8_t out[static 64]);
void seal_output_begin(struct transcript *t, const uint8_t ctx[static 64], uint64_t sealing_attempt,
                       const uint8_t point[static POINT_BYTES]);
void seal_output_record(struct transcript *t, const uint8_t record_id[static 64], const uint8_t commitment[static 64]);
void seal_output_end(struct transcript *t, const uint8_t recipes_hash[static 64], uint8_t out[static 64]);

/* T("quietbell/1/audit/seed", seed): first 8 bytes, little-endian, top bit cleared; public after the full opening. */
uint64_t seed_audit(const struct secret *seed);

#endif
