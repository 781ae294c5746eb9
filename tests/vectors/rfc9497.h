/*
 * RFC 9497 test vectors, ristretto255-SHA512, mode 1 (VOPRF): proofs of equal discrete logarithms.
 * Cut out of the source by a script, not typed. All values hexadecimal.
 */
#ifndef QB_VECTORS_RFC9497_H
#define QB_VECTORS_RFC9497_H

static const char rfc9497_sk[] = "e6f73f344b79b379f1a0dd37e07ff62e38d9f71345ce62ae3a9bc60b04ccd909";
static const char rfc9497_pk[] = "c803e2cc6b05fc15064549b5920659ca4a77b2cca6f04f6b357009335476ad4e";
static const struct {
	int n; /* elements in the batch */
	const char *blinded[2], *evaluated[2], *proof, *r;
} rfc9497_proofs[] = {
    {1,
     {"863f330cc1a1259ed5a5998a23acfd37fb4351a793a5b3c090b642ddc439b945"},
     {"aa8fa048764d5623868679402ff6108d2521884fa138cd7f9c7669a9a014267e"},
     "ddef93772692e535d1a53903db24367355cc2cc78de93b3be5a8ffcc6985dd06"
     "6d4346421d17bf5117a2a1ff0fcb2a759f58a539dfbe857a40bce4cf49ec600d",
     "222a5e897cf59db8145db8d16e597e8facb80ae7d4e26d9881aa6f61d645fc0e"},
    {1,
     {"cc0b2a350101881d8a4cba4c80241d74fb7dcbfde4a61fde2f91443c2bf9ef0c"},
     {"60a59a57208d48aca71e9e850d22674b611f752bed48b36f7a91b372bd7ad468"},
     "401a0da6264f8cf45bb2f5264bc31e109155600babb3cd4e5af7d181a2c9dc0a"
     "67154fabf031fd936051dec80b0b6ae29c9503493dde7393b722eafdf5a50b02",
     "222a5e897cf59db8145db8d16e597e8facb80ae7d4e26d9881aa6f61d645fc0e"},
    {2,
     {"863f330cc1a1259ed5a5998a23acfd37fb4351a793a5b3c090b642ddc439b945",
      "90a0145ea9da29254c3a56be4fe185465ebb3bf2a1801f7124bbbadac751e654"},
     {"aa8fa048764d5623868679402ff6108d2521884fa138cd7f9c7669a9a014267e",
      "cc5ac221950a49ceaa73c8db41b82c20372a4c8d63e5dded2db920b7eee36a2a"},
     "cc203910175d786927eeb44ea847328047892ddf8590e723c37205cb74600b0a"
     "5ab5337c8eb4ceae0494c2cf89529dcf94572ed267473d567aeed6ab873dee08",
     "419c4f4f5052c53c45f3da494d2b67b220d02118e0857cdbcf037f9ea84bbe0c"},
};

#endif
