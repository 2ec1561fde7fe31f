/* SPDX-License-Identifier: MIT */
/* The chain holds, and whoever changes a word of it is found. */
#include "store_scene.h"

/* NIST, "SHA-256 example values" to FIPS 180-4 (csrc.nist.gov), and the digest of no bytes. */
static void digests_are_the_published_ones(void **state)
{
    (void)state;
    static const struct {
        const char *text, *digest;
    } cases[] = {
        {"abc", "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"},
        {"abcdbcdecdefdefgefghfghighijhijkijkljklmklmnlmnomnopnopq",
         "248d6a61d20638b8e5c026930c3e6039a33ce45964ff2167f6ecedd419db06c1"},
        {"", "e3b0c44298fc1c149afbf4c8996fb92427ae41e4649b934ca495991b7852b855"},
    };
    for (size_t index = 0; index < sizeof cases / sizeof cases[0]; index++) {
        char hex[FACT_DIGEST_SIZE];
        assert_int_equal(digest_sha256(cases[index].text, strlen(cases[index].text), hex), FW_OK);
        assert_string_equal(hex, cases[index].digest);
    }
}

static void seal(struct ledger_entry *entry, const char *previous_link, const char *payload)
{
    *entry = (struct ledger_entry){.entry = 7, .utc_s = SCENE_NOW_S, .kind = "cycle"};
    text_add(&entry->payload, "%s", payload);
    assert_int_equal(ledger_seal(previous_link, entry), FW_OK);
    text_clear(&entry->payload);
}

/* The link by its stated recipe, spelled out once by hand: printf 'P\n7\n1928851200\ncycle\nD\n' | sha256sum */
static void a_link_digests_five_lines(void **state)
{
    (void)state;
    struct ledger_entry entry;
    char text[256];
    char link[FACT_DIGEST_SIZE];
    seal(&entry, "", "{}");
    assert_string_equal(entry.payload_digest, "44136fa355b3678a1146ad16f7e8649e94fb4fc21fe77e8310c060f61caaff8a");
    int length = snprintf(text, sizeof text, "\n7\n1928851200\ncycle\n%s\n", entry.payload_digest);
    assert_int_equal(digest_sha256(text, (size_t)length, link), FW_OK);
    assert_string_equal(entry.link, link);
}

static void every_member_of_an_entry_is_in_its_link(void **state)
{
    (void)state;
    struct ledger_entry entry;
    char links[6][FACT_DIGEST_SIZE];
    char previous[FACT_DIGEST_SIZE];
    seal(&entry, "", "{}");
    memcpy(previous, entry.link, sizeof previous);
    memcpy(links[0], entry.link, sizeof links[0]);
    seal(&entry, previous, "{}");
    memcpy(links[1], entry.link, sizeof links[1]);
    seal(&entry, "", "{ }");
    memcpy(links[2], entry.link, sizeof links[2]);
    seal(&entry, "", "{}");
    struct ledger_entry changed = entry;
    changed.entry++;
    assert_int_equal(ledger_link("", &changed), FW_OK);
    memcpy(links[3], changed.link, sizeof links[3]);
    changed = entry;
    changed.utc_s++;
    assert_int_equal(ledger_link("", &changed), FW_OK);
    memcpy(links[4], changed.link, sizeof links[4]);
    changed = entry;
    changed.kind[0] = 'C';
    assert_int_equal(ledger_link("", &changed), FW_OK);
    memcpy(links[5], changed.link, sizeof links[5]);
    for (size_t left = 0; left < 6; left++)
        for (size_t right = 0; right < left; right++)
            assert_string_not_equal(links[left], links[right]);
}

enum { ENTRIES = 5 };

/* Five cycles; the entries' numbers. */
static void fill(struct scene *scene, int64_t entries[ENTRIES])
{
    struct store *store = scene_open(scene, STORE_WRITE);
    struct picture *picture = scene_picture(scene);
    for (size_t index = 0; index < ENTRIES; index++) {
        assert_int_equal(scene_cycle(scene, store, &picture, SCENE_NOW_S + 300 * (int64_t)index, 1.0), FW_OK);
        entries[index] = picture->next_entry - 1;
    }
    picture_destroy(picture);
    store_close(store);
}

static void a_whole_chain_passes(void **state)
{
    struct scene *scene = *state;
    int64_t entries[ENTRIES];
    size_t count = 0;
    fill(scene, entries);
    struct store *store = scene_open(scene, STORE_READ);
    assert_int_equal(store_check_ledger(store, &count, &scene->error), FW_OK);
    assert_int_equal(count, ENTRIES);
    store_close(store);
}

static void pruned_payloads_leave_the_chain_whole(void **state)
{
    struct scene *scene = *state;
    int64_t entries[ENTRIES];
    size_t count = 0;
    fill(scene, entries);
    scene_meddle(scene, "DELETE FROM ledger_payload WHERE entry < (SELECT max(entry) FROM ledger)");
    struct store *store = scene_open(scene, STORE_READ);
    assert_int_equal(store_check_ledger(store, &count, &scene->error), FW_OK);
    assert_int_equal(count, ENTRIES);
    store_close(store);
}

/* Each change is made to entry 3 of 5; %lld is its number. `found_at`: index of the entry that no longer fits. */
static const struct {
    const char *sql, *says, *shows;
    size_t found_at;
} tampers[] = {
    {"UPDATE ledger_payload SET payload = replace(payload, '1', '2') WHERE entry = %lld", "payload", "a payload", 2},
    {"UPDATE ledger SET payload_digest = replace(payload_digest, substr(payload_digest, 1, 1), '-') WHERE entry = "
     "%lld",
     "link", "a payload's digest", 2},
    {"UPDATE ledger SET link = replace(link, substr(link, 1, 1), '-') WHERE entry = %lld", "link", "a link", 2},
    {"UPDATE ledger SET utc = utc + 1 WHERE entry = %lld", "link", "a time", 2},
    {"UPDATE ledger SET kind = 'reseed' WHERE entry = %lld", "link", "a kind", 2},
    {"UPDATE ledger SET entry = entry - 1 WHERE entry = %lld", "link", "a number", 2},
    {"DELETE FROM ledger WHERE entry = %lld", "link", "an entry taken out", 3},
};

static void every_change_to_the_chain_is_found_and_its_entry_named(void **state)
{
    struct scene *scene = *state;
    int64_t entries[ENTRIES];
    size_t size = 0;
    fill(scene, entries);
    char *whole = scene_read_file(scene->file, &size);
    for (size_t index = 0; index < sizeof tampers / sizeof tampers[0]; index++) {
        char sql[256];
        char named[64];
        size_t count = 99;
        int64_t at = entries[tampers[index].found_at] - (strcmp(tampers[index].shows, "a number") == 0);
#pragma GCC diagnostic push
#pragma GCC diagnostic ignored "-Wformat-nonliteral"
        snprintf(sql, sizeof sql, tampers[index].sql, (long long)entries[2]);
#pragma GCC diagnostic pop
        snprintf(named, sizeof named, "ledger entry %lld: its %s", (long long)at, tampers[index].says);
        scene_meddle(scene, sql);
        struct store *store = scene_open(scene, STORE_READ);
        if (store_check_ledger(store, &count, &scene->error) != FW_DAMAGED ||
            strstr(scene->error.text, named) == NULL || count != 99)
            fail_msg("%s was not found: %s", tampers[index].shows, scene->error.text);
        store_close(store);
        scene_write_file(scene->file, whole, size);
    }
    free(whole);
}

/* A chain rebuilt from a changed entry on is whole, but its newest link is not the one that was printed. */
static void a_rebuilt_chain_ends_in_another_link(void **state)
{
    struct scene *scene = *state;
    struct store *store = scene_open(scene, STORE_WRITE);
    struct picture *picture = scene_picture(scene);
    assert_int_equal(scene_cycle(scene, store, &picture, SCENE_NOW_S, 1.0), FW_OK);
    struct ledger_entry changed = {.entry = picture->next_entry - 1, .utc_s = SCENE_NOW_S + 300, .kind = "cycle"};
    text_add(&changed.payload, "{\"picture\":2}");
    assert_int_equal(ledger_seal("", &changed), FW_OK);
    assert_string_not_equal(changed.link, picture->newest_link);
    text_clear(&changed.payload);
    picture_destroy(picture);
    store_close(store);
}

#define WITH_SCENE(test) cmocka_unit_test_setup_teardown(test, scene_set_up, scene_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(digests_are_the_published_ones),
        cmocka_unit_test(a_link_digests_five_lines),
        cmocka_unit_test(every_member_of_an_entry_is_in_its_link),
        WITH_SCENE(a_whole_chain_passes),
        WITH_SCENE(pruned_payloads_leave_the_chain_whole),
        WITH_SCENE(every_change_to_the_chain_is_found_and_its_entry_named),
        WITH_SCENE(a_rebuilt_chain_ends_in_another_link),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
