/*
 * test_chain.c - the digest chain against values computed outside (BLAKE2b-256, RFC 7693, chained
 * as d_i = H(d_{i-1} || row) with d_0 = 32 zero bytes).
 */
#include <criterion/criterion.h>

#include <string.h>

#include "store/store_impl.h"

Test(chain, two_rows)
{
    static const char *const rows[] = {"1|2026-01-01T00:00:00Z|rater1|add|incision",
                                       "2|2026-01-01T00:00:05Z|rater1|move|incision"};
    static const char *const want[] = {
        "176b573943ca41713d6f37ee35a1e464ac05aef0f74b16bf34829309a107db07",
        "35cce1c8baa28318e80033d1aded7cbf73f4bda8fd69e9a91d9a8774892be315"};
    uint8_t digest[DIGEST_SIZE] = {0}, next[DIGEST_SIZE];
    char text[DIGEST_TEXT_SIZE];
    for (size_t i = 0; i < 2; i++) {
        chain_next(digest, rows[i], strlen(rows[i]), next);
        memcpy(digest, next, sizeof digest);
        digest_text(digest, text);
        cr_expect_str_eq(text, want[i]);
    }
}
