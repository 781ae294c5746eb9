/* The table and its two directions. */
#include "server/custody/words.h"

#include <string.h>

static const char table[WORDS_COUNT][WORDS_LETTERS_MAX + 1] = {
    "acorn",   "anchor",  "apple",   "apron",   "attic",   "autumn",  "badger",  "bakery",  "basket",  "beacon",
    "bench",   "bishop",  "blossom", "bottle",  "bramble", "brick",   "bridge",  "broom",   "button",  "cabin",
    "cactus",  "canvas",  "carpet",  "castle",  "chalk",   "cherry",  "chimney", "cider",   "circle",  "clay",
    "cliff",   "clover",  "cobalt",  "coffee",  "comet",   "copper",  "cotton",  "cricket", "crystal", "curtain",
    "cushion", "dairy",   "damson",  "dancer",  "dawn",    "desert",  "diamond", "dolphin", "donkey",  "dragon",
    "drum",    "duck",    "dusty",   "eagle",   "earth",   "echo",    "elbow",   "ember",   "engine",  "evening",
    "exit",    "fabric",  "falcon",  "farmer",  "feather", "fender",  "ferry",   "fiddle",  "fjord",   "flannel",
    "flint",   "forest",  "fossil",  "fudge",   "garden",  "garlic",  "geese",   "ginger",  "glacier", "goblet",
    "gravel",  "guitar",  "gully",   "harbour", "harvest", "hazel",   "hedge",   "helmet",  "herring", "hollow",
    "honey",   "horse",   "hunter",  "iceberg", "indigo",  "inkwell", "island",  "ivory",   "jelly",   "jewel",
    "jigsaw",  "journey", "juniper", "kayak",   "kettle",  "kitchen", "kite",    "ladder",  "lamp",    "lantern",
    "lapwing", "laurel",  "lemon",   "lettuce", "lilac",   "linen",   "lizard",  "lobster", "locket",  "lunar",
    "magnet",  "marble",  "meadow",  "melon",   "mercury", "metal",   "midday",  "milk",    "mirror",  "mitten",
    "monday",  "mortar",  "mosaic",  "museum",  "music",   "mustard", "napkin",  "narrow",  "needle",  "nest",
    "nickel",  "noodle",  "north",   "nutmeg",  "oasis",   "ocean",   "olive",   "onion",   "orange",  "orchard",
    "otter",   "oval",    "paddle",  "palace",  "pancake", "parsley", "pastry",  "pebble",  "pencil",  "pewter",
    "piano",   "picnic",  "pigeon",  "pillow",  "planet",  "pond",    "poplar",  "potato",  "powder",  "prairie",
    "pudding", "pumpkin", "purple",  "puzzle",  "quartz",  "quilt",   "quiver",  "rabbit",  "radish",  "railway",
    "rainbow", "raven",   "recipe",  "ribbon",  "rooster", "rope",    "rubber",  "ruby",    "saffron", "sailor",
    "salmon",  "sandal",  "saucer",  "scarlet", "season",  "shadow",  "shell",   "shovel",  "silver",  "skylark",
    "sled",    "snow",    "sofa",    "spade",   "spinach", "sponge",  "square",  "stable",  "station", "steeple",
    "stone",   "stream",  "sugar",   "summer",  "sunset",  "swallow", "syrup",   "tangle",  "teapot",  "temple",
    "thicket", "thistle", "thunder", "timber",  "toast",   "tomato",  "topaz",   "towel",   "tractor", "trumpet",
    "tulip",   "tunnel",  "turnip",  "twig",    "uncle",   "urchin",  "valley",  "vanilla", "velvet",  "vessel",
    "village", "violet",  "volcano", "voyage",  "waffle",  "wagon",   "walnut",  "wheat",   "window",  "wolf",
    "wooden",  "wren",    "wrist",   "yogurt",  "zebra",   "zinc",
};

const char *words_word(uint8_t value)
{
	return table[value];
}

void words_put(const uint8_t *p, size_t n, struct buf *out)
{
	for (size_t i = 0; i < n; i++) {
		if (i > 0)
			buf_u8(out, ' ');
		buf_text(out, table[p[i]]);
	}
}

static bool is_letter(char ch)
{
	return (ch >= 'a' && ch <= 'z') || (ch >= 'A' && ch <= 'Z');
}

/* The value of a word in lower case: the whole word, or exactly its first letters. -1: none. */
static int value_of(const char *word, size_t n)
{
	for (int v = 0; v < WORDS_COUNT; v++)
		if (strncmp(table[v], word, n) == 0 && (n == strlen(table[v]) || n == WORDS_LETTERS_ENOUGH))
			return v;
	return -1;
}

enum qb_status words_parse(const char *text, size_t length, uint8_t *out, size_t n, struct qb_error *e)
{
	size_t count = 0;
	for (size_t at = 0, end; at < length; at = end) {
		char word[WORDS_LETTERS_MAX + 1] = "";
		for (end = at; end < length && is_letter(text[end]); end++)
			if (end - at < sizeof word - 1)
				word[end - at] = (char)(text[end] | 0x20);
		if (end == at) {
			if (memchr(" \t\r\n-.,", text[at], 7) == NULL)
				return qb_fail(e, QB_FORMAT, "words", "write letters, and spaces between the words",
				               "something else than letters comes after word %zu", count);
			end++;
			continue;
		}
		int value = end - at > WORDS_LETTERS_MAX ? -1 : value_of(word, end - at);
		if (value < 0)
			return qb_fail(e, QB_FORMAT, "words", "ask for this word again, spelt",
			               "word %zu, \"%s\", is not one of ours", count + 1, word);
		if (count == n)
			return qb_fail(e, QB_FORMAT, "words", NULL, "there are more than %zu words", n);
		out[count++] = (uint8_t)value;
	}
	if (count != n)
		return qb_fail(e, QB_FORMAT, "words", NULL, "there are %zu words, %zu are needed", count, n);
	return QB_OK;
}
