/* SPDX-License-Identifier: MIT */
/* Whether the published tables are read as they stand, so that the checks that lean on them mean something. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <dirent.h>

#include "tests/engine/reference_table.h"

static void columns_are_found_by_name_and_empty_cells_are_not_numbers(void **state)
{
    (void)state;
    struct reference_table table = reference_table_load("normal_and_critical_depth.csv");
    assert_int_equal(table.row_count, 12);
    assert_int_equal(table.column_count, 10);
    assert_true(reference_table_number(&table, 0, "value_published") == 3.36);
    assert_true(isnan(reference_table_number(&table, 1, "S0")));
    size_t row = reference_table_find(&table, "case", "same, full perimeter"); /* a quoted cell with a comma */
    assert_true(reference_table_number(&table, row, "value_recomputed") == 1.1062);
    reference_table_clear(&table);
}

static void a_whole_column_comes_as_numbers(void **state)
{
    (void)state;
    struct reference_table table = reference_table_load("flood_wye1960.csv");
    double *inflow_m3s = reference_table_column(&table, "inflow");
    double peak_m3s = 0;
    for (size_t row = 0; row < table.row_count; row++)
        peak_m3s = fmax(peak_m3s, inflow_m3s[row]);
    assert_int_equal(table.row_count, 34);
    assert_true(peak_m3s == 1145); /* flood_facts_and_linear_fits.csv says the same */
    free(inflow_m3s);
    reference_table_clear(&table);
}

static bool is_of_hydraulics(const char *name)
{
    static const char *const others[] = {"cap12_", "packaged_", "qartod_", "verification_"};
    for (size_t i = 0; i < sizeof others / sizeof *others; i++)
        if (strncmp(name, others[i], strlen(others[i])) == 0)
            return false;
    return true;
}

static char *read_document(const char *name)
{
    static char text[1 << 16];
    char path[4096];
    snprintf(path, sizeof path, "%s/docs/%s", FW_SOURCE_DIR, name);
    FILE *file = fopen(path, "rb");
    assert_non_null(file);
    size_t size = fread(text, 1, sizeof text - 1, file);
    fclose(file);
    assert_true(size < sizeof text - 1);
    text[size] = '\0';
    return text;
}

/* "x.csv" is told as `x`; a series of files that differ in their ending may be told as `..._ending`. */
static bool tells_of(const char *document, const char *file)
{
    char told[300], last[300];
    size_t stem = strlen(file) - strlen(".csv");
    snprintf(told, sizeof told, "`%.*s`", (int)stem, file);
    const char *ending = strrchr(file, '_');
    snprintf(last, sizeof last, "`...%.*s`", ending == NULL ? 0 : (int)(file + stem - ending), ending);
    return strstr(document, told) != NULL || strstr(document, last) != NULL;
}

static void every_published_table_loads_and_the_hydraulic_ones_are_accounted_for(void **state)
{
    (void)state;
    const char *document = read_document("hydraulics-checks.md");
    DIR *folder = opendir(FW_SOURCE_DIR "/tests/reference");
    assert_non_null(folder);
    size_t count = 0;
    for (struct dirent *entry; (entry = readdir(folder)) != NULL;) {
        size_t length = strlen(entry->d_name);
        if (length < 5 || strcmp(entry->d_name + length - 4, ".csv") != 0)
            continue;
        struct reference_table table = reference_table_load(entry->d_name);
        assert_true(table.row_count >= 2);
        reference_table_clear(&table);
        if (is_of_hydraulics(entry->d_name) && !tells_of(document, entry->d_name))
            fail_msg("docs/hydraulics-checks.md does not say what becomes of %s", entry->d_name);
        count++;
    }
    closedir(folder);
    assert_true(count >= 37);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(columns_are_found_by_name_and_empty_cells_are_not_numbers),
        cmocka_unit_test(a_whole_column_comes_as_numbers),
        cmocka_unit_test(every_published_table_loads_and_the_hydraulic_ones_are_accounted_for),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
