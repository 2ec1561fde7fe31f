/* SPDX-License-Identifier: MIT */
/*
 * Any text as a configuration: refused with faults that each name file and line, or read; never a crash, a leak or a
 * wait. What is read makes a network, or is refused by name.
 */
#include "daemon/settings/settings.h"
#include "tests/fuzz/fuzz.h"

static void check_faults(const struct settings_faults *faults, const struct fw_error *error)
{
    if (faults->count == 0 || error->text[0] == '\0')
        fuzz_fail("refused with %zu faults and '%s'", faults->count, error->text);
    for (size_t i = 0; i < faults->count; i++)
        if (strncmp(faults->faults[i].text, "x.json:", 7) != 0 || faults->faults[i].line == 0)
            fuzz_fail("a fault without its place: line %zu, '%s'", faults->faults[i].line, faults->faults[i].text);
}

static void check_river(const struct settings *settings)
{
    struct network *network = NULL;
    struct network_fault fault = {""};
    const struct network_options options = {.time_step_s = (double)settings->time_step_s,
                                            .group_count = settings->roughness_factor_count,
                                            .roughness_factors = settings->roughness_factors,
                                            .members_per_group = 1,
                                            .largest_discharge_m3s = 50.0};
    enum fw_status status = network_create(&settings->river, &options, &network, &fault);
    if (status == FW_BAD_INPUT &&
        strstr(fault.text, "section") == NULL) /* too small for the flow: known only by then */
        fuzz_fail("the settings were read, and the network refuses: %s", fault.text);
    network_destroy(network);
}

static void read_text(const uint8_t *data, size_t size, enum settings_need need)
{
    struct settings *settings = NULL;
    struct settings_faults faults = {0};
    struct fw_error error = {.status = FW_OK};
    enum fw_status status = settings_read_text("x.json", (const char *)data, size, need, &settings, &faults, &error);
    if (status == FW_OK)
        check_river(settings);
    else if (status == FW_BAD_INPUT)
        check_faults(&faults, &error);
    else
        fuzz_fail("status %d: %s", (int)status, error.text);
    settings_faults_clear(&faults);
    settings_destroy(settings);
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    read_text(data, size, SETTINGS_FOR_RUN);
    read_text(data, size, SETTINGS_FOR_ROUTE);
    return 0;
}
