/*
 * XChaCha20-Poly1305: draft-irtf-cfrg-xchacha-03, 2.2.1 (HChaCha20) and A.3.1 (AEAD).
 * Cut out of the source by a script, not typed. All values hexadecimal.
 */
#ifndef QB_VECTORS_SYMMETRIC_H
#define QB_VECTORS_SYMMETRIC_H

static const char hchacha_key[] = "000102030405060708090a0b0c0d0e0f101112131415161718191a1b1c1d1e1f";
static const char hchacha_nonce[] = "000000090000004a0000000031415927";
static const char hchacha_subkey[] = "82413b4227b27bfed30e42508a877d73a0f9e4d58a74a853c12ec41326d3ecdc";
static const char xchacha_plaintext[] =
    "4c616469657320616e642047656e746c656d656e206f662074686520636c617373206f66202739393a20496620492063"
    "6f756c64206f6666657220796f75206f6e6c79206f6e652074697020666f7220746865206675747572652c2073756e73"
    "637265656e20776f756c642062652069742e";
static const char xchacha_aad[] = "50515253c0c1c2c3c4c5c6c7";
static const char xchacha_key[] = "808182838485868788898a8b8c8d8e8f909192939495969798999a9b9c9d9e9f";
static const char xchacha_nonce[] = "404142434445464748494a4b4c4d4e4f5051525354555657";
static const char xchacha_ciphertext[] =
    "bd6d179d3e83d43b9576579493c0e939572a1700252bfaccbed2902c21396cbb731c7f1b0b4aa6440bf3a82f4eda7e39"
    "ae64c6708c54c216cb96b72e1213b4522f8c9ba40db5d945b11b69b982c1bb9e3f3fac2bc369488f76b2383565d3fff9"
    "21f9664c97637da9768812f615c68b13b52e";
static const char xchacha_tag[] = "c0875924c1c7987947deafd8780acf49";

/* RFC 7693 appendix A ("abc"), appendix E (self-test over four lengths of hash and six of input), and part of the keyed
 * known answers published with BLAKE2 (blake2b-kat.txt, commit ed1974e): input is 00 01 02 ..., the key 00..3f. */
static const char blake2b_abc[] =
    "ba80a53f981c4d0d6a2797b69f12f6e94c212f14685ac4b74b12bb6fdbffa2d17d87c5392aab792dc252d5de4533cc95"
    "18d38aa8dbf1925ab92386edd4009923";
static const char blake2b_grand[] = "c23a7800d98123bd10f506c61e29da5603d763b8bbad2e737f5e765a7bccd475";
static const struct {
	unsigned n;
	const char *hash;
} blake2b_keyed[] = {
    {0, "10ebb67700b1868efb4417987acf4690ae9d972fb7a590c2f02871799aaa4786b5e996e8f0f4eb981fc214b005f42d2f"
        "f4233499391653df7aefcbc13fc51568"},
    {1, "961f6dd1e4dd30f63901690c512e78e4b45e4742ed197c3c5e45c549fd25f2e4187b0bc9fe30492b16b0d0bc4ef9b0f3"
        "4c7003fac09a5ef1532e69430234cebd"},
    {2, "da2cfbe2d8409a0f38026113884f84b50156371ae304c4430173d08a99d9fb1b983164a3770706d537f49e0c916d9f32"
        "b95cc37a95b99d857436f0232c88a965"},
    {3, "33d0825dddf7ada99b0e7e307104ad07ca9cfd9692214f1561356315e784f3e5a17e364ae9dbb14cb2036df932b77f4b"
        "292761365fb328de7afdc6d8998f5fc1"},
    {63, "bd965bf31e87d70327536f2a341cebc4768eca275fa05ef98f7f1b71a0351298de006fba73fe6733ed01d75801b4a928"
         "e54231b38e38c562b2e33ea1284992fa"},
    {64, "65676d800617972fbd87e4b9514e1c67402b7a331096d3bfac22f1abb95374abc942f16e9ab0ead33b87c91968a6e509"
         "e119ff07787b3ef483e1dcdccf6e3022"},
    {65, "939fa189699c5d2c81ddd1ffc1fa207c970b6a3685bb29ce1d3e99d42f2f7442da53e95a72907314f4588399a3ff5b0a"
         "92beb3f6be2694f9f86ecf2952d5b41c"},
    {127, "76d2d819c92bce55fa8e092ab1bf9b9eab237a25267986cacf2b8ee14d214d730dc9a5aa2d7b596e86a1fd8fa0804c77"
          "402d2fcd45083688b218b1cdfa0dcbcb"},
    {128, "72065ee4dd91c2d8509fa1fc28a37c7fc9fa7d5b3f8ad3d0d7a25626b57b1b44788d4caf806290425f9890a3a2a35a90"
          "5ab4b37acfd0da6e4517b2525c9651e4"},
    {129, "64475dfe7600d7171bea0b394e27c9b00d8e74dd1e416a79473682ad3dfdbb706631558055cfc8a40e07bd015a4540dc"
          "dea15883cbbf31412df1de1cd4152b91"},
    {254, "d444bfa2362a96df213d070e33fa841f51334e4e76866b8139e8af3bb3398be2dfaddcbc56b9146de9f68118dc5829e7"
          "4b0c28d7711907b121f9161cb92b69a9"},
    {255, "142709d62e28fcccd0af97fad0f8465b971e82201dc51070faa0372aa43e92484be1c1e73ba10906d5d1853db6a4106e"
          "0a7bf9800d373d6dee2d46d62ef2a461"},
};

/* Argon2id v1.3 by the reference command line tool: 5 passes, 1024 KiB, one lane, salt ABCDEFGHIJKLMNOP. */
static const struct {
	const char *password, *hash;
} argon2id_cases[] = {
    {"313233", "3c5d010180ba0cf5b6b858cba23b318e42d33088983c404598599c3b029ecac6"},
    {"2127c2a72425262f2829", "b0268bd63015c3d8f866f9be385507b466a9bfc75f271c2c1e97c00bf53224ba"},
    {"c3b6", "b113fc7863dbc87b7d1366c3b468d3864a2473ce46e90ed3641fff87ada561f7"},
};

#endif
