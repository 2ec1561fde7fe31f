/* SPDX-License-Identifier: MIT */
/*
 * Reading the settings with every allocation failing in turn. This program puts its own allocator before that of the
 * C library, which a sanitizer does as well: built with one, it skips.
 */
#include "tests/daemon/settings_text.h"

#if defined(__SANITIZE_ADDRESS__) || defined(__SANITIZE_THREAD__)
#define HAS_SANITIZER 1
#elif defined(__has_feature)
#if __has_feature(address_sanitizer) || __has_feature(thread_sanitizer) || __has_feature(memory_sanitizer)
#define HAS_SANITIZER 1
#endif
#endif

#ifndef HAS_SANITIZER

static long allocations_left = -1; /* negative: as many as are wanted */
static long allocations_in_use;

static bool may_allocate(void)
{
    if (allocations_left == 0)
        return false;
    if (allocations_left > 0)
        allocations_left--;
    return true;
}

extern void *__libc_malloc(size_t size);
extern void *__libc_calloc(size_t count, size_t size);
extern void *__libc_realloc(void *old, size_t size);
extern void __libc_free(void *memory);

void *malloc(size_t size)
{
    void *memory = may_allocate() ? __libc_malloc(size) : NULL;
    allocations_in_use += memory != NULL;
    return memory;
}

void *calloc(size_t count, size_t size)
{
    void *memory = may_allocate() ? __libc_calloc(count, size) : NULL;
    allocations_in_use += memory != NULL;
    return memory;
}

void *realloc(void *old, size_t size)
{
    void *memory = may_allocate() ? __libc_realloc(old, size) : NULL;
    allocations_in_use += memory != NULL && old == NULL;
    return memory;
}

void free(void *memory)
{
    allocations_in_use -= memory != NULL;
    __libc_free(memory);
}

/*
 * Returns the status with that many allocations granted, and demands that nothing is left behind; with -1, all are
 * granted and libraries may take what they keep for good.
 */
static enum fw_status read_with(const struct text *text, long granted)
{
    struct settings *settings = NULL;
    struct settings_faults faults = {0};
    struct fw_error error = {0};
    long before = allocations_in_use;
    allocations_left = granted;
    enum fw_status status =
        settings_read_text("/etc/x.json", text->bytes, text->length, SETTINGS_FOR_RUN, &settings, &faults, &error);
    allocations_left = -1;
    if (status == FW_NO_MEMORY) {
        assert_null(settings);
        assert_string_equal(error.text, "/etc/x.json: out of memory");
    }
    settings_destroy(settings);
    settings_faults_clear(&faults);
    if (granted >= 0)
        assert_int_equal(allocations_in_use, before);
    return status;
}

static void every_allocation_that_fails_is_told_and_leaves_nothing_behind(const char *path, enum fw_status in_the_end)
{
    struct text text = settings_text_load(path);
    assert_int_equal(read_with(&text, -1), in_the_end);
    long granted = 0;
    enum fw_status status;
    while ((status = read_with(&text, granted)) == FW_NO_MEMORY && granted < 100000)
        granted++;
    assert_int_equal(status, in_the_end);
    assert_true(granted > 50);
    print_message("%ld allocations failed in turn\n", granted);
    text_clear(&text);
}

static void a_sound_file_that_meets_no_memory_says_so(void **state)
{
    (void)state;
    every_allocation_that_fails_is_told_and_leaves_nothing_behind(SETTINGS_EXAMPLE, FW_OK);
}

static void a_faulty_file_that_meets_no_memory_says_so(void **state)
{
    (void)state;
    every_allocation_that_fails_is_told_and_leaves_nothing_behind(SETTINGS_OUTLET, FW_BAD_INPUT);
}

static void schema_and_manual_that_meet_no_memory_say_so(void **state)
{
    (void)state;
    enum fw_status (*const makers[])(struct text *) = {settings_schema, settings_manual};
    for (size_t i = 0; i < 2; i++) {
        enum fw_status status = FW_NO_MEMORY;
        for (long granted = 0; status == FW_NO_MEMORY && granted < 1000; granted++) {
            struct text made = {0};
            long before = allocations_in_use;
            allocations_left = granted;
            status = makers[i](&made);
            allocations_left = -1;
            assert_true(status == FW_OK || made.bytes == NULL);
            text_clear(&made);
            assert_int_equal(allocations_in_use, before);
        }
        assert_int_equal(status, FW_OK);
    }
}

static void a_zone_that_meets_no_memory_says_so(void **state)
{
    (void)state;
    struct when_zone zone = {.offset_s = 77};
    struct fw_error error = {0};
    allocations_left = 0;
    enum fw_status status = when_zone_parse("Australia/Lord_Howe", &zone, &error);
    allocations_left = -1;
    assert_int_equal(status, FW_NO_MEMORY);
    assert_int_equal(zone.offset_s, 77);
    assert_string_equal(error.text, "zone Australia/Lord_Howe: out of memory");
}

#else

static void a_zone_that_meets_no_memory_says_so(void **state)
{
    (void)state;
    skip();
}

static void a_sound_file_that_meets_no_memory_says_so(void **state)
{
    (void)state;
    skip();
}

static void a_faulty_file_that_meets_no_memory_says_so(void **state)
{
    (void)state;
    skip();
}

static void schema_and_manual_that_meet_no_memory_say_so(void **state)
{
    (void)state;
    skip();
}

#endif

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_sound_file_that_meets_no_memory_says_so),
        cmocka_unit_test(a_faulty_file_that_meets_no_memory_says_so),
        cmocka_unit_test(a_zone_that_meets_no_memory_says_so),
        cmocka_unit_test(schema_and_manual_that_meet_no_memory_say_so),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
