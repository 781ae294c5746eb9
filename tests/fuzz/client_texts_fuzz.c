/* Files and answers that a client reads from others: signed answers, evidence of two histories, slots, claims. */
#include <stdlib.h>
#include <string.h>
#include <sys/mman.h>
#include <stdio.h>
#include <unistd.h>

#include "client/agent/watch.h"
#include "client/cli/answer_file.h"
#include "client/cli/claim_file.h"
#include "client/link/heads.h"
#include "server/base/check.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

static void as_claims(const uint8_t *data, size_t size)
{
	char path[64];
	json_t *list = NULL;
	int fd = memfd_create("claims", 0);
	CHECK(fd >= 0 && write(fd, data, size) == (ssize_t)size);
	(void)snprintf(path, sizeof path, "/proc/self/fd/%d", fd);
	if (claim_file_read(path, &list, NULL) == QB_OK)
		CHECK(json_is_array(list));
	json_decref(list);
	close(fd);
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
	struct answer_file *a = calloc(1, sizeof *a), *again = calloc(1, sizeof *a);
	struct watch_slot slot;
	uint8_t key[32];
	char why[200];
	json_t *doc = NULL;
	CHECK(a != NULL && again != NULL);
	if (json_read((const char *)data, size, "text", &doc, NULL) == QB_OK) {
		if (answer_read(doc, a, NULL) == QB_OK) {
			json_t *out = answer_json(a);
			CHECK(answer_read(out, again, NULL) == QB_OK && a->n == again->n);
			CHECK(answer_verify(a, NULL) != QB_OK); /* nobody signed */
			json_decref(out);
		}
		(void)watch_slot_parse(doc, 3, "tarn", &slot, NULL);
	}
	CHECK(heads_evidence_check((const char *)data, size, key, why, NULL) != QB_OK);
	as_claims(data, size);
	json_decref(doc);
	free(a);
	free(again);
	return 0;
}
