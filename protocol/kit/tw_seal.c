#include "tw_seal.h"

#include <string.h>

#define BLOCK_BYTES 64u
#define SEALED_BIT 0x80u

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

static const uint32_t start[8] = {0x6a09e667u, 0xbb67ae85u, 0x3c6ef372u, 0xa54ff53au,
                                  0x510e527fu, 0x9b05688cu, 0x1f83d9abu, 0x5be0cd19u};

/* SHA-256 so far. The block is kept in words, and is the message schedule itself: it is written
 * over as it is used, 64 bytes of stack and not 256. */
typedef struct {
    uint32_t state[8];
    uint32_t block[16];
} sha256;

static uint32_t turned(uint32_t value, uint8_t by)
{
    return value >> by | value << (32u - by);
}

static uint32_t big_sum(uint32_t value, uint8_t first, uint8_t second, uint8_t third)
{
    return turned(value, first) ^ turned(value, second) ^ turned(value, third);
}

/* The next word of the schedule (FIPS 180-4 section 6.2.2, step 1). */
static uint32_t scheduled(uint32_t *w, uint8_t i)
{
    if (i >= 16u) {
        const uint32_t near = w[(i + 14u) & 15u];
        const uint32_t far = w[(i + 1u) & 15u];
        w[i & 15u] += w[(i + 9u) & 15u] + (turned(near, 17) ^ turned(near, 19) ^ near >> 10) +
                      (turned(far, 7) ^ turned(far, 18) ^ far >> 3);
    }
    return w[i & 15u];
}

/* One block (FIPS 180-4 section 6.2.2), added to the hash so far in from. What was in state before stands in the block
 * afterwards: where from is another hash, nothing is lost (tw_tag lives on that). */
static void take_block(sha256 *sum, const uint32_t *from)
{
    uint32_t s[8];
    for (uint8_t i = 0; i < 8u; i++) {
        s[i] = from[i];
    }
    for (uint8_t i = 0; i < 64u; i++) {
        uint32_t next = s[7] + big_sum(s[4], 6, 11, 25) + ((s[4] & s[5]) ^ (~s[4] & s[6])) +
                        round_constants[i] + scheduled(sum->block, i);
        for (uint8_t at = 7; at > 0u; at--) {
            s[at] = s[at - 1u];
        }
        s[4] += next;
        s[0] = next + big_sum(s[1], 2, 13, 22) + ((s[1] & s[2]) ^ (s[1] & s[3]) ^ (s[2] & s[3]));
    }
    for (uint8_t i = 0; i < 8u; i++) {
        sum->block[i] = sum->state[i];
        sum->state[i] = from[i] + s[i];
    }
}

/* The tag, block by block: the key's, what is covered; then for the outer hash the key's again,
 * after which the inner digest stands in the block already. Each second block is padded (FIPS
 * 180-4 section 5.1.1): a one, zeros, the length in bits. What a frame holds fits one block. */
uint8_t tw_tag(const uint8_t key[TW_KEY_BYTES], uint8_t *covered, uint8_t length)
{
    sha256 sum = {{0}, {0}};
    for (uint8_t block = 0; block < 4u; block++) {
        const uint8_t is_key = !(block & 1u);
        const uint8_t end = block == 3u ? 32u : length;
        for (uint8_t at = block == 3u ? 32u : 0u; at < BLOCK_BYTES; at++) {
            uint8_t byte = at == end ? 0x80u : 0u;
            if (is_key) {
                byte = (uint8_t)((at < TW_KEY_BYTES ? key[at] : 0u) ^ (block ? 0x5cu : 0x36u));
            } else if (at < end) {
                byte = covered[at];
            }
            sum.block[at / 4u] = sum.block[at / 4u] << 8 | byte;
        }
        if (!is_key) {
            sum.block[15] = (BLOCK_BYTES + (uint32_t)end) * 8u;
        }
        take_block(&sum, is_key ? start : sum.state);
    }
    uint8_t differ = 0;
    for (uint8_t at = 0; at < TW_TAG_BYTES; at++) {
        covered[length + at] ^= (uint8_t)(sum.state[at / 4u] >> (24u - 8u * (at % 4u)));
        differ |= covered[length + at];
    }
    return differ;
}

tw_verdict tw_open(const tw_keys *keys, uint8_t *payload, uint8_t *length)
{
    if (*length == 0u || !(payload[0] & SEALED_BIT)) {
        return TW_UNSEALED;
    }
    if (*length < TW_HEADER_BYTES + TW_SEAL_BYTES || *length > TW_MAX_SEALED) {
        return TW_SEAL_TOO_SHORT;
    }
    const uint8_t *key = keys->keys[payload[0] >> 4 & 7u];
    if (key == NULL) {
        return TW_UNKNOWN_SLOT;
    }
    if (tw_tag(key, payload, (uint8_t)(*length - TW_TAG_BYTES))) {
        return TW_FORGED;
    }
    payload[0] &= 0x0Fu;
    *length = (uint8_t)(*length - TW_SEAL_BYTES);
    return TW_OBEYED;
}

void tw_gate_follow(tw_gate *gate, uint32_t epoch)
{
    if (epoch != gate->epoch) {
        gate->epoch = epoch;
        gate->proven = 0;
    }
}

/* RFC 4303 section 3.4.3. */
static tw_verdict take_counter(tw_gate *gate, uint32_t count)
{
    if (count > gate->edge) {
        const uint32_t ahead = count - gate->edge;
        gate->seen = ahead < 64u ? gate->seen << ahead | 1u : 1u;
        gate->edge = count;
        return TW_OBEYED;
    }
    const uint32_t behind = gate->edge - count;
    if (behind >= 64u) {
        return TW_TOO_OLD;
    }
    const uint64_t bit = (uint64_t)1u << behind;
    if (gate->seen & bit) {
        return TW_REPEATED;
    }
    gate->seen |= bit;
    return TW_OBEYED;
}

/* Commands, and Query: what names a command, and so an epoch. */
static uint8_t names_command(uint8_t code)
{
    return code == TW_CODE_QUERY || (code & 0xF0u) == TW_CODE_PIVOT;
}

/* Whether a request carries this boot's number, and so could only have been sent in it. All that
 * can have it at the same place. */
static uint8_t proves(const tw_gate *gate, const uint8_t *payload)
{
    const uint8_t code = payload[TW_AT_CODE];
    return (names_command(code) || code == TW_CODE_PROBE || code == TW_CODE_TRACE_ASK) &&
           tw_get32(payload + TW_AT_PROBE_BOOT) == gate->boot;
}

tw_verdict tw_gate_admit(tw_gate *gate, const tw_keys *keys, uint8_t *payload, uint8_t *length)
{
    tw_verdict verdict = tw_open(keys, payload, length);
    if (verdict != TW_OBEYED) {
        return verdict;
    }
    if (!tw_is_request(payload, *length)) {
        return TW_NO_MESSAGE;
    }
    const uint8_t code = payload[TW_AT_CODE];
    const uint32_t count = tw_get32(payload + *length); /* what the seal leaves behind it */
    const uint32_t opening = tw_get32(payload + *length + 4);
    if (opening != gate->epoch) {
        verdict = names_command(code) && tw_get32(payload + TW_AT_QUERY_EPOCH) == opening
                      ? TW_OBEYED
                      : TW_OTHER_OPENING;
    } else if (gate->proven) {
        verdict = take_counter(gate, count);
    } else if (proves(gate, payload)) {
        gate->proven = 1;
        gate->edge = count;
        gate->seen = UINT64_MAX; /* all that came before counts as seen */
    } else {
        verdict = TW_NOT_FRESH;
    }
    return code == TW_CODE_STOP || code == TW_CODE_ROLL_CALL ? TW_OBEYED : verdict;
}

uint8_t tw_seal(const tw_keys *keys, tw_counter *counter, uint8_t *payload, uint8_t length)
{
    const uint8_t slot = keys->sending_slot;
    if (length < TW_HEADER_BYTES || length > TW_MAX_UNSEALED || slot >= TW_SLOTS ||
        keys->keys[slot] == NULL || counter->count == UINT32_MAX) {
        return 0;
    }
    counter->count++;
    payload[0] = (uint8_t)((payload[0] & 0x0Fu) | (uint8_t)(slot << 4) | SEALED_BIT);
    tw_put32(payload + length, counter->count);
    tw_put32(payload + length + 4, counter->opening);
    const uint8_t covered = (uint8_t)(length + TW_SEAL_BYTES - TW_TAG_BYTES);
    memset(payload + covered, 0, TW_TAG_BYTES);
    (void)tw_tag(keys->keys[slot], payload, covered);
    return (uint8_t)(covered + TW_TAG_BYTES);
}
