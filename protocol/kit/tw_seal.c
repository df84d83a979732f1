#include "tw_seal.h"

#include <string.h>

#define BLOCK_BYTES 64u
#define SEALED_BIT 0x80u

enum { CODE_ROLL_CALL = 0x01, CODE_QUERY = 0x02, CODE_PIVOT = 0x10, CODE_FLASH = 0x13,
       CODE_STOP = 0x20, AT_BOOT = 10, BOOT_END = 14 };

/* FIPS 180-4 section 4.2.2. */
static const uint32_t round_constants[64] = {
    0x428a2f98u, 0x71374491u, 0xb5c0fbcfu, 0xe9b5dba5u, 0x3956c25bu, 0x59f111f1u, 0x923f82a4u,
    0xab1c5ed5u, 0xd807aa98u, 0x12835b01u, 0x243185beu, 0x550c7dc3u, 0x72be5d74u, 0x80deb1feu,
    0x9bdc06a7u, 0xc19bf174u, 0xe49b69c1u, 0xefbe4786u, 0x0fc19dc6u, 0x240ca1ccu, 0x2de92c6fu,
    0x4a7484aau, 0x5cb0a9dcu, 0x76f988dau, 0x983e5152u, 0xa831c66du, 0xb00327c8u, 0xbf597fc7u,
    0xc6e00bf3u, 0xd5a79147u, 0x06ca6351u, 0x14292967u, 0x27b70a85u, 0x2e1b2138u, 0x4d2c6dfcu,
    0x53380d13u, 0x650a7354u, 0x766a0abbu, 0x81c2c92eu, 0x92722c85u, 0xa2bfe8a1u, 0xa81a664bu,
    0xc24b8b70u, 0xc76c51a3u, 0xd192e819u, 0xd6990624u, 0xf40e3585u, 0x106aa070u, 0x19a4c116u,
    0x1e376c08u, 0x2748774cu, 0x34b0bcb5u, 0x391c0cb3u, 0x4ed8aa4au, 0x5b9cca4fu, 0x682e6ff3u,
    0x748f82eeu, 0x78a5636fu, 0x84c87814u, 0x8cc70208u, 0x90befffau, 0xa4506cebu, 0xbef9a3f7u,
    0xc67178f2u};

static uint32_t turned(uint32_t value, uint8_t by)
{
    return value >> by | value << (32u - by);
}

/* One block (FIPS 180-4 section 6.2.2), with a message schedule of 16 words that is written over
 * as it is used: 64 bytes of stack and not 256. */
static void add_block(tw_sha256 *sum)
{
    uint32_t w[16];
    uint32_t s[8];
    for (uint8_t i = 0; i < 16u; i++) {
        const uint8_t *at = sum->block + 4u * i;
        w[i] = (uint32_t)at[0] << 24 | (uint32_t)at[1] << 16 | (uint32_t)at[2] << 8 | at[3];
    }
    memcpy(s, sum->state, sizeof s);
    for (uint8_t i = 0; i < 64u; i++) {
        if (i >= 16u) {
            const uint32_t near = w[(i + 14u) & 15u];
            const uint32_t far = w[(i + 1u) & 15u];
            w[i & 15u] += w[(i + 9u) & 15u] + (turned(near, 17) ^ turned(near, 19) ^ near >> 10) +
                          (turned(far, 7) ^ turned(far, 18) ^ far >> 3);
        }
        const uint32_t t1 = s[7] + (turned(s[4], 6) ^ turned(s[4], 11) ^ turned(s[4], 25)) +
                            ((s[4] & s[5]) ^ (~s[4] & s[6])) + round_constants[i] + w[i & 15u];
        const uint32_t t2 = (turned(s[0], 2) ^ turned(s[0], 13) ^ turned(s[0], 22)) +
                            ((s[0] & s[1]) ^ (s[0] & s[2]) ^ (s[1] & s[2]));
        memmove(s + 1, s, 7u * sizeof s[0]);
        s[4] += t1;
        s[0] = t1 + t2;
    }
    for (uint8_t i = 0; i < 8u; i++) {
        sum->state[i] += s[i];
    }
    sum->filled = 0;
    sum->blocks++;
}

void tw_sha256_begin(tw_sha256 *sum)
{
    static const uint32_t start[8] = {0x6a09e667u, 0xbb67ae85u, 0x3c6ef372u, 0xa54ff53au,
                                      0x510e527fu, 0x9b05688cu, 0x1f83d9abu, 0x5be0cd19u};
    memcpy(sum->state, start, sizeof start);
    sum->filled = 0;
    sum->blocks = 0;
}

void tw_sha256_add(tw_sha256 *sum, const uint8_t *data, uint8_t length)
{
    for (uint8_t at = 0; at < length; at++) {
        sum->block[sum->filled++] = data[at];
        if (sum->filled == BLOCK_BYTES) {
            add_block(sum);
        }
    }
}

void tw_sha256_end(tw_sha256 *sum, uint8_t digest[32])
{
    const uint64_t bits = ((uint64_t)sum->blocks * BLOCK_BYTES + sum->filled) * 8u;
    const uint8_t one = 0x80u;
    const uint8_t zero = 0u;
    tw_sha256_add(sum, &one, 1);
    while (sum->filled != 56u) {
        tw_sha256_add(sum, &zero, 1);
    }
    for (uint8_t i = 0; i < 8u; i++) {
        sum->block[56u + i] = (uint8_t)(bits >> (56u - 8u * i));
    }
    add_block(sum);
    for (uint8_t i = 0; i < 32u; i++) {
        digest[i] = (uint8_t)(sum->state[i / 4u] >> (24u - 8u * (i % 4u)));
    }
}

static void begin_padded(tw_sha256 *sum, const uint8_t key[TW_KEY_BYTES], uint8_t pad)
{
    tw_sha256_begin(sum);
    for (uint8_t at = 0; at < BLOCK_BYTES; at++) {
        const uint8_t byte = (uint8_t)((at < TW_KEY_BYTES ? key[at] : 0u) ^ pad);
        tw_sha256_add(sum, &byte, 1);
    }
}

void tw_tag(const uint8_t key[TW_KEY_BYTES], const uint8_t *covered, uint8_t length,
            uint8_t tag[TW_TAG_BYTES])
{
    tw_sha256 sum;
    uint8_t digest[32];
    begin_padded(&sum, key, 0x36u);
    tw_sha256_add(&sum, covered, length);
    tw_sha256_end(&sum, digest);
    begin_padded(&sum, key, 0x5cu);
    tw_sha256_add(&sum, digest, 32);
    tw_sha256_end(&sum, digest);
    memcpy(tag, digest, TW_TAG_BYTES);
}

/* 1 where all bytes are the same; looks at all of them, whatever it finds. */
static uint8_t same_tag(const uint8_t *left, const uint8_t *right)
{
    uint8_t differ = 0;
    for (uint8_t at = 0; at < TW_TAG_BYTES; at++) {
        differ = (uint8_t)(differ | (left[at] ^ right[at]));
    }
    return differ == 0u;
}

tw_verdict tw_open(const tw_keys *keys, const uint8_t *payload, uint8_t length,
                   uint8_t plain[TW_MAX_UNSEALED], uint8_t *plain_length, uint64_t *counter)
{
    uint8_t tag[TW_TAG_BYTES];
    if (length == 0u || !(payload[0] & SEALED_BIT)) {
        return TW_UNSEALED;
    }
    if (length < TW_HEADER_BYTES + TW_SEAL_BYTES) {
        return TW_SEAL_TOO_SHORT;
    }
    const uint8_t *key = keys->keys[payload[0] >> 4 & 7u];
    if (key == NULL) {
        return TW_UNKNOWN_SLOT;
    }
    const uint8_t covered = (uint8_t)(length - TW_TAG_BYTES);
    const uint8_t body_end = (uint8_t)(length - TW_SEAL_BYTES);
    tw_tag(key, payload, covered, tag);
    if (!same_tag(tag, payload + covered) || body_end > TW_MAX_UNSEALED) {
        return TW_FORGED;
    }
    memcpy(plain, payload, body_end);
    plain[0] = payload[0] & 0x0Fu;
    *plain_length = body_end;
    *counter = 0;
    for (uint8_t at = 8; at > 0u; at--) {
        *counter = *counter << 8 | payload[body_end + at - 1u];
    }
    return TW_OBEYED;
}

/* RFC 4303 section 3.4.3. */
static tw_verdict take_counter(tw_gate *gate, uint64_t counter)
{
    if (counter > gate->edge) {
        const uint64_t ahead = counter - gate->edge;
        gate->seen = ahead < 64u ? gate->seen << ahead | 1u : 1u;
        gate->edge = counter;
        return TW_OBEYED;
    }
    const uint64_t behind = gate->edge - counter;
    if (behind >= 64u) {
        return TW_TOO_OLD;
    }
    if (gate->seen >> behind & 1u) {
        return TW_REPEATED;
    }
    gate->seen |= (uint64_t)1u << behind;
    return TW_OBEYED;
}

/* Whether a payload carries this boot's number, and so could only have been sent in it. */
static uint8_t proves(const tw_gate *gate, const uint8_t *plain, uint8_t length)
{
    const uint8_t code = plain[1];
    const uint8_t has_boot = code == CODE_QUERY || (code >= CODE_PIVOT && code <= CODE_FLASH);
    if (!has_boot || length < BOOT_END) {
        return 0;
    }
    const uint32_t boot = (uint32_t)plain[AT_BOOT] | (uint32_t)plain[AT_BOOT + 1] << 8 |
                          (uint32_t)plain[AT_BOOT + 2] << 16 | (uint32_t)plain[AT_BOOT + 3] << 24;
    return boot == gate->boot;
}

tw_verdict tw_gate_admit(tw_gate *gate, const tw_keys *keys, const uint8_t *payload,
                         uint8_t length, uint8_t plain[TW_MAX_UNSEALED], uint8_t *plain_length)
{
    uint64_t counter = 0;
    const tw_verdict verdict = tw_open(keys, payload, length, plain, plain_length, &counter);
    if (verdict != TW_OBEYED) {
        return verdict;
    }
    const uint8_t harmless = plain[1] == CODE_STOP || plain[1] == CODE_ROLL_CALL;
    if (!gate->proven) {
        if (proves(gate, plain, *plain_length)) {
            gate->proven = 1;
            gate->edge = counter;
            gate->seen = UINT64_MAX; /* all that came before counts as seen */
            return TW_OBEYED;
        }
        return harmless ? TW_OBEYED : TW_NOT_FRESH;
    }
    const tw_verdict taken = take_counter(gate, counter);
    return harmless ? TW_OBEYED : taken;
}

uint8_t tw_seal(const tw_keys *keys, tw_counter *counter, const uint8_t *payload, uint8_t length,
                uint8_t sealed[TW_MAX_UNSEALED + TW_SEAL_BYTES])
{
    const uint8_t slot = keys->sending_slot;
    if (length < TW_HEADER_BYTES || length > TW_MAX_UNSEALED || slot >= TW_SLOTS ||
        keys->keys[slot] == NULL || counter->count == UINT32_MAX) {
        return 0;
    }
    counter->count++;
    memcpy(sealed, payload, length);
    sealed[0] = (uint8_t)((payload[0] & 0x0Fu) | (uint8_t)(slot << 4) | SEALED_BIT);
    for (uint8_t at = 0; at < 4u; at++) {
        sealed[length + at] = (uint8_t)(counter->count >> (8u * at));
        sealed[length + 4u + at] = (uint8_t)(counter->opening >> (8u * at));
    }
    const uint8_t covered = (uint8_t)(length + TW_SEAL_BYTES - TW_TAG_BYTES);
    tw_tag(keys->keys[slot], sealed, covered, sealed + covered);
    return (uint8_t)(covered + TW_TAG_BYTES);
}
