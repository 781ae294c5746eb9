/*
 * Our own formats, computed by make_custody_frozen.py from the reference page, independently of server/. Hexadecimal.
 */
#ifndef QB_VECTORS_CUSTODY_FROZEN_H
#define QB_VECTORS_CUSTODY_FROZEN_H

static const char frozen_ctx[] =
    "fee768275ab696cc12b3c83712193e12e30ddd6791f76e6ff36400f40600bf6b997190b5c63a0f84d0324db83aa95a7b"
    "6a8b6e6d0e47014ab0fbe6f576632040";
static const char frozen_commitment[] =
    "1c52f06a1ea7bec2ccbc34046dc0c6f3c2ac77102271db6c559050f231c97dc970c1f1ca88899099e588c052a41ba263"
    "08c8697c629d3e58d3c59f94c9661c6e";
static const char frozen_seed[] =
    "4b8a075cd63bc1f4c9c6799adc20cfa003aaa6acf045c4a7bee4c2b5a7dc13271c52fdc7217bf91704b339ff9c6cb9af"
    "d5196c12dfd02e3acd9ff6c19e2824e5";
static const char frozen_truth[] = "ee3c22129a81b2c400e41b0d71a6f77b0513c7ae0c022b631b798b6c219c8a4c";
static const char frozen_r[] = "21bbce3fd24549ffd7bd36c7b45a4bc811a7aeec1a66b6eee103b09fae319b09";
static const char frozen_slot_key[] = "7641fb0543116db9a6d87e0acfb7d00459d7f8b92767e5d55323746724cd9939";
static const char frozen_uniform_bits[] = "cf881ac2cd67f522";
static const char frozen_audit_seed[] = "14343038b08ec96f";
static const char frozen_campaign_truth[] = "316dc4cd88470f1fd32ff5a9e53bbc8c922bcfa80c0374f181c121695062174f";
static const char frozen_seed_record_scalar[] = "5c5fbd8060fcf3a25ed15a565d499d0282cc5d2600d3f1a63cd04c59bcc63300";
static const char frozen_key_commitment[] =
    "cbf39ec6b816cc2f4e41819572733d5c8a9bd10bda619fceee73983e9f30a259b12324f4d0032bd74c02d97ac481d057"
    "60fb51a2824ccfbf7c199ab7bd86bb8b";
static const char frozen_s[] = "3cc05e5224cfab78765f41a361026f4c5f6eda14d589f7ddeebbfa6fbacc367e";
static const char frozen_g2[] = "a8608722aebec84d38eb387d9a70a7041be935aa1d6063093079bc04975fb46b";
static const char frozen_record_head[] =
    "5142523101000100000102030405060708090a0b0c0d0e0f05000000000000001f0000000000000000c8c3edb73da914"
    "00a0b8304603000009090909090909090909090909090909cbf39ec6b816cc2f4e41819572733d5c8a9bd10bda619fce"
    "ee73983e9f30a259000000000000000000000000000000000000000000000000144a7b6814a02bf1d4ba17544d6f38b4"
    "d8e7409730480ac226b81a346b2f104c66bb0edb7022bb7229da7e3814a0e0ec4fec11faaef8372bd987268af5a32349"
    "f0010bebd3f947b7f2e56c3ec6961da5b98c164e5db7efa73ca22eb575dd790b385de6c94fb90ad8796daa213b1db7a1"
    "9775e45a74f7dbfaca4bf5faa19e1808";
static const char frozen_record_hash[] =
    "34dcafcbbfd4e2d731b55e43989dc1dbf9a251794cfb4ebbca35918c0e71efdda097de79d1707c982dfbcc5edbe8767c"
    "5d54e5d9a0dd26f065770a9907a04a90";
static const char frozen_record_id[] =
    "ab8592fda1b59ca01dcdaeab16ec946b29f721c4c32976e96b0351941b112f25e436da14321a11afec40dc76c3714ae7"
    "11a8516852be804e548fc0d5fff434b8";
static const char frozen_recipe_scalar[] = "e557ccbe102a10cb1c5b2ebf3a22ec54044273fc7451cc63b0bfc857e57a310b";
static const char frozen_recipe_hash[] =
    "047621d38ee0af5eb550e6fa39063d6f0de43f26fb0e62fa0c29cfb65aad7edd7a9f2fc485eeba75738b642fae3abe77"
    "dd882be2c0504aed56bdca68df6de24c";
static const char frozen_certificate[] =
    "04385ad19530939ac1bcd92261a81a8c7618e955dbaf42a5ec0b2fe307b272d30a231fe01bf206c4618416ead195b7cc"
    "5cf8eeb186b30a15719032226bfbd479";
static const char frozen_entry_digest_of_body[] =
    "541a0106660a304c2ea71fe06739aabde7a06713d2f0fe9f87b3059483fb4b2e080c9ef40e605c53c641e1aaf71f06cd"
    "221893d3398b796a478ec98e48381da6";
static const char frozen_hidden[] =
    "f5b5d4e7e16551328cf467c67e8dff0fedaddf76dd0b1a7eb68230e67ba436120e6840707548ca6c03a6d5d8feb8cf04"
    "ca06c0e4f30c72b41d6ababfd8efe89d";
static const char frozen_key_id[] = "235bb2091b13ffac12c959bc29af188d";
static const char frozen_fingerprint[] = "16bad07e77f4c667f220674942589d9a";
static const char frozen_two_key_other[] = "eeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeeee";
static const char frozen_two_key_counter[] = "00000000";
static const char frozen_two_key_block[] = "a0b4ed464943f3e904e4e2f901aa28fb";
static const char frozen_two_key_tag[] = "c75c5fea7605e06bef6eba36dc445400";

#endif
