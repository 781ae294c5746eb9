/*
 * RFC 9591 appendix E.3 (ristretto255, SHA-512): key, polynomial and shares of a 2-of-3 sharing.
 * Cut out of the source by a script, not typed. All values hexadecimal.
 */
#ifndef QB_VECTORS_RFC9591_H
#define QB_VECTORS_RFC9591_H

static const char rfc9591_secret[] = "1b25a55e463cfd15cf14a5d3acc3d15053f08da49c8afcf3ab265f2ebc4f970b";
static const char rfc9591_public[] = "e2a62f39eede11269e3bd5a7d97554f5ca384f9f6d3dd9c3c0d05083c7254f57";
static const char rfc9591_coefficient[] = "410f8b744b19325891d73736923525a4f596c805d060dfb9c98009d34e3fec02";
static const char *const rfc9591_shares[] = {
    "5c3430d391552f6e60ecdc093ff9f6f4488756aa6cebdbad75a768010b8f830e",
    "b06fc5eac20b4f6e1b271d9df2343d843e1e1fb03c4cbb673f2872d459ce6f01",
    "f17e505f0e2581c6acfe54d3846a622834b5e7b50cad9a2109a97ba7a80d5c04",
};

/* Distributed generation over ristretto255, published test vectors of the open specification c2sp.org/cocktail-dkg
 * v0.2: commitments C_im, the shares s_j that come out and their public points Y_j, the group key. Only the group
 * arithmetic is compared: transcripts differ from ours. */
static const char dkg0_group[] = "0a1592f555f20d3a3b3c7bc032ebe4b46cb2870da141404873e5fc8d4136120f";
static const char *const dkg0_commitments[3][2] = {
    {"fa98c4b2508b75d64f2420d2569cb878d9fde3124fa7b3341004f2f2e424c33a",
     "08fcd4093599c2dd7def1bfe843d8fd6c9041caa33c00a2bad11fd4bc1f16134"},
    {"bc6af038fb6950d0503bfd9f5dea21671dc0f2b27b55c5be99229c601239d055",
     "f4e3e84108289d680c8e1ad24cd6a70fab1afe233b6b3ad839ee87742baceb39"},
    {"a4d8f448d74e78344d5db2324e0e8e09ee1706110f61cd057977b0e220008839",
     "e2244a3f3ea70ecd697189daff4792d5af5e4eff132c1bb6101b04a5adc6c743"},
};
static const struct {
	const char *share, *point;
} dkg0_out[3] = {
    {"09b8de601c1d28161f3b18410245595d791de5e54372f19628760125fa263304",
     "5e130c137d31a445d1b8df391b41db0dbf6a9e13649abb40d68d3fa955eca22d"},
    {"7db7ccef4df8fb157766082728cd2f072c0ec3af6d352a3d0af49919daf9950b",
     "2c9a0c7d2a8e3c37c7b1ebb5d40bad2e9127151ad160a8b7d0782482fd790007"},
    {"04e3c4216570bdbdf8f4006a6f5b279cdefea07997f862e3eb71320ebaccf802",
     "b434b345762decb04e5d9937cc5aee03b828808ea8d5500ea7c06c684712e143"},
};
static const char dkg1_group[] = "08ee9bb0fc75a34dabe96f9f808d89234a7456d0563bc0887404fc9c0bb7b406";
static const char *const dkg1_commitments[5][3] = {
    {"9a55100f998dd0ed358a37954290863893f68905c31c9cb490ecace1b06eac6e",
     "8a4776c1463b5fb6380a32f3d074c0de444de000402b6b98531e0bc01fe15b57",
     "321cda88edb81cf1a1a8c74864bf8bdd6dee1f7191a0258248b10825a6de3f1f"},
    {"c259b6466b4fae98a6a8bd0505fab7f0a9dd207571ebf2675032a0b4815f015f",
     "a4133524dd4c4ba5d54cd77b4708a5ebbbba1a26c1e651e8231b611b92fb8162",
     "369879a4257b4307d637b2763dab9715ac263e8570a74fe06148dabb8293256a"},
    {"004a6fe76163a12b39f754c9a9c15d29dfca88b7ee4a176940c4ba006fbfbc72",
     "74421e8b64bb1062d489c0056b98033450f512df8b6bea8b3db993234c05334c",
     "a8e83652823da58d580f75de85f8c85291125cde85357b8fe07f3049a049410e"},
    {"3053098dbe48ce6da90fe816dc1a24c35b835d1c2c98a6f5e0d29117f668621c",
     "9a6786177d7945e165487a150e5872c8ecc459f540becde065dea50d961dfd18",
     "b8a23454601960c736ac67e37df840796a7ecf5cd7e3322be82fe54cf2de5931"},
    {"c0077971f510f9a59c6e2acb4052996719f24b145afb785886f225d1d995ff36",
     "c2470fad041fa046059462d7b4070dc5b9e970fcb676605ac38f618e980b0e0d",
     "8231ab4a8036efb232ff44f8244a6040a433d2c476ba32467f62377f7422f778"},
};
static const struct {
	const char *share, *point;
} dkg1_out[5] = {
    {"653535bf967662ac857d654764a1b9550abe0809f415b378ab7ada025b4c2802",
     "be53f58edb38e3ad67964229124f804350ef7b1665a1b2dd6a20eb2b04829160"},
    {"5d69230ed12c9e7d43e62b58540fff1a951e5a0dfdb119190f86339f3dae6b0c",
     "dc3f9543e44f2b1db3ea4506cd5e0bc54162cb9f4e1144e7beaa89f499b3a93e"},
    {"0f3a902905dfa28f9a303b21ca3729b0c3f533850e8ee4e4848cc411018a5d01",
     "d27e7ca67ff733af3048c939cc008841a3ec0c761d415ac842fce072f0cd3126"},
    {"554f67cb67539592379682e8820ef63e9643967028aa13dc0c8e8d5aa5dffd00",
     "de380d0925d9b53277d69e3307053745a7d972ad62a7d76ef6219475053d7f52"},
    {"2fa9a8f3f88975861a1702ae7e9365c70c0881cf4a06a7fea68a8e792aaf4c0b",
     "0e0be364b5ed7e1b454b28ef38be3c8c2de44324df78f764247d4c599584514e"},
};

#endif
