/*
 * Bytes as plain words, for reading a fingerprint over the telephone: one word for each byte. No two words agree in
 * their first four letters, and any two differ in at least two letters, so that one misheard or mistyped letter never
 * makes another word.
 */
#ifndef QB_CUSTODY_WORDS_H
#define QB_CUSTODY_WORDS_H

#include <stddef.h>
#include <stdint.h>

#include "server/base/buf.h"
#include "server/base/err.h"

#define WORDS_COUNT          256
#define WORDS_LETTERS_MAX    7
#define WORDS_LETTERS_ENOUGH 4 /* as many letters of a word are enough */

const char *words_word(uint8_t value);
/* n words with spaces between them are appended. For public values: which word is taken shows in the cache. */
void words_put(const uint8_t *p, size_t n, struct buf *out);
/*
 * Reads exactly n words; case does not matter, spaces, dashes, commas and dots may stand between them.
 *
 * Returned: out             n bytes
 * Errors:   QB_FORMAT       a word that is not ours, with its number; too few; too many
 */
enum qb_status words_parse(const char *text, size_t length, uint8_t *out, size_t n, struct qb_error *e) QB_MUST_USE;

#endif
