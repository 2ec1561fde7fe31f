/* SPDX-License-Identifier: MIT */
#include "daemon/settings/settings.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <cmocka.h>

static void the_example_is_read_without_a_fault(void **state)
{
    (void)state;
    struct settings *settings = NULL;
    struct settings_faults faults = {0};
    struct fw_error error = {0};
    enum fw_status status = settings_read_file(FW_SOURCE_DIR "/config/forewater.json", SETTINGS_FOR_RUN, &settings,
                                               &faults, &error);
    for (size_t i = 0; i < faults.count; i++)
        print_error("%s\n", faults.faults[i].text);
    settings_faults_clear(&faults);
    assert_int_equal(status, FW_OK);
    assert_string_equal(settings->district_name, "Vennmark");
    assert_int_equal(settings->point_count, 3);
    settings_destroy(settings);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_example_is_read_without_a_fault),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
