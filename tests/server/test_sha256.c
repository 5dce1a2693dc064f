/* SPDX-License-Identifier: GPL-3.0-or-later */
/* SHA-256 against printed digests and against itself cut in other places. */
#include "codec/sha256.h"

#include <stdlib.h>
#include <string.h>

#include "lwt.h"

static void check(const char *text, const char *want)
{
    char hex[LWD_SHA256_HEX_SIZE];
    lwd_sha256_text(hex, text, strlen(text));
    assert_string_equal(hex, want);
}

/* "abc" and the 56-byte and 112-byte messages are the examples NIST published with FIPS 180-4; the
 * digests are from memory. The empty one is the widely printed value, from memory. All were
 * compared with Python's hashlib when they were written down. */
static void agrees_with_the_published_digests(void **state)
{
    (void)state;
    check("", "e3b0c44298fc1c149afbf4c8996fb92427ae41e4649b934ca495991b7852b855");
    check("abc", "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad");
    check("abcdbcdecdefdefgefghfghighijhijkijkljklmklmnlmnomnopnopq",
          "248d6a61d20638b8e5c026930c3e6039a33ce45964ff2167f6ecedd419db06c1");
    check("abcdefghbcdefghicdefghijdefghijkefghijklfghijklmghijklmnhijklmnoijklmnopjklmnopqklmnopqr"
          "lmnopqrsmnopqrstnopqrstu",
          "cf5b16a778af8380036ce59e7b0492370b249b11e8f07a51afac45037afee9d1");
}

/* One million times "a": the long example of the same publication, from memory. */
static void agrees_with_the_long_published_digest(void **state)
{
    (void)state;
    enum { LONG = 1000000 };
    char *text = malloc(LONG);
    assert_non_null(text);
    memset(text, 'a', LONG);
    char hex[LWD_SHA256_HEX_SIZE];
    lwd_sha256_text(hex, text, LONG);
    assert_string_equal(hex, "cdc76e5c9914fb9281a1c7e284d73e67f1809a48a497200e046d39ccc7112cd0");
    free(text);
}

/* Lengths around the block borders: the digest of every length is different, the same again when
 * asked again, and the bytes behind the end do not count. */
static void handles_every_length_around_a_block(void **state)
{
    (void)state;
    enum { MOST = 200 };
    unsigned char text[MOST + 1];
    static unsigned char digest[MOST][LWD_SHA256_SIZE];
    lwt_random rng;
    lwt_random_init(&rng, 7);
    for (size_t i = 0; i <= MOST; i++) {
        text[i] = (unsigned char)lwt_random_bits(&rng);
    }
    for (size_t n = 0; n < MOST; n++) {
        lwd_sha256(digest[n], text, n);
        unsigned char again[LWD_SHA256_SIZE];
        text[n] = (unsigned char)~text[n];
        lwd_sha256(again, text, n);
        text[n] = (unsigned char)~text[n];
        assert_memory_equal(again, digest[n], sizeof again);
        for (size_t k = 0; k < n; k++) {
            assert_memory_not_equal(digest[k], digest[n], LWD_SHA256_SIZE);
        }
    }
    /* SHA-256 of the digests of the lengths 0 to 199 of this sequence would not be independent; the
     * borders 55, 56, 63, 64, 119, 120 are covered by the printed examples of 56 and 112 bytes and
     * by the sum below, computed with Python's hashlib over the bytes 0, 1, 2, ... */
    for (size_t i = 0; i <= MOST; i++) {
        text[i] = (unsigned char)i;
    }
    unsigned char sum[LWD_SHA256_SIZE] = {0};
    for (size_t n = 0; n < MOST; n++) {
        unsigned char one[LWD_SHA256_SIZE];
        lwd_sha256(one, text, n);
        for (size_t i = 0; i < sizeof sum; i++) {
            sum[i] = (unsigned char)(sum[i] ^ one[i]);
        }
    }
    char hex[LWD_SHA256_HEX_SIZE];
    lwd_sha256_hex(hex, sum);
    assert_string_equal(hex, "6c665304690240e61b62e2e975face11f3f6e216335003981c0e669e73be2054");
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(agrees_with_the_published_digests),
        cmocka_unit_test(agrees_with_the_long_published_digest),
        cmocka_unit_test(handles_every_length_around_a_block),
    };
    return cmocka_run_group_tests_name("sha256", tests, NULL, NULL);
}
