/* SPDX-License-Identifier: MIT */
#include "daemon/settings/settings.h"

#include <errno.h>
#include <math.h>
#include <sys/stat.h>
#include <unistd.h>

#include "tests/daemon/settings_text.h"

static struct settings *read_sound(const char *path, enum settings_need need)
{
    struct settings *settings = NULL;
    struct settings_faults faults = {0};
    struct fw_error error = {0};
    enum fw_status status = settings_read_file(path, need, &settings, &faults, &error);
    settings_text_print_faults(&faults);
    settings_faults_clear(&faults);
    if (status != FW_OK)
        fail_msg("%s", error.text);
    return settings;
}

/* --- what a sound file becomes --- */

/* Numbers of the scenario as it is told: gauge, crew times, marks. */
static void the_example_becomes_the_district_it_describes(void **state)
{
    (void)state;
    struct settings *settings = read_sound(SETTINGS_EXAMPLE, SETTINGS_FOR_RUN);
    assert_string_equal(settings->file, SETTINGS_EXAMPLE);
    assert_string_equal(settings->district_name, "Vennmark");
    assert_string_equal(settings->datum, "VD-71");
    assert_true(settings->zone.is_fixed);
    assert_int_equal(settings->zone.offset_s, 3600);
    assert_int_equal(settings->night_from_minute, 1200);
    assert_int_equal(settings->night_to_minute, 360);
    assert_string_equal(settings->store_file, "/var/lib/forewater/history.db");
    assert_string_equal(settings->inbox_path, "/var/spool/forewater/inbox");
    assert_int_equal(settings->forecast_every_s, 300);
    assert_int_equal(settings->horizon_s, 43200);
    assert_int_equal(settings->warm_up_s, 86400);
    assert_int_equal(settings->time_step_s, 60);
    assert_int_equal(settings->member_count, 400);
    assert_int_equal(settings->roughness_factor_count, 3);
    assert_true(settings->roughness_factors[2] == 1.2);
    assert_int_equal(settings->channel_count, 3);
    assert_string_equal(settings->channels[0].run[0], "/etc/forewater/hooks/page");
    assert_string_equal(settings->channels[0].run[1], "duty-officer");
    assert_null(settings->channels[0].run[2]);
    assert_int_equal(settings->channels[0].argument_count, 2);
    assert_true(settings->channels[2].is_journal);
    assert_int_equal(settings->role_count, 2);
    assert_int_equal(settings->roster[0].to[1], 2);
    assert_int_equal(settings->roster[0].accept_within_s, 600);
    settings_destroy(settings);
}

static void the_gauge_of_the_example_has_its_limits_in_si(void **state)
{
    (void)state;
    struct settings *settings = read_sound(SETTINGS_EXAMPLE, SETTINGS_FOR_RUN);
    const struct settings_gauge *gauge = &settings->gauges[0];
    assert_string_equal(gauge->id, "orlin-scar");
    assert_int_equal(gauge->measures, SETTINGS_STAGE);
    assert_true(gauge->zero_m == 126.40);
    assert_true(gauge->has_rating);
    /* the coefficient by continuity at 2.60 m: 11.8 x 2.18^1.72 / 2.18^2.15, by hand 8.440 */
    assert_true(fabs(gauge->rating.segments[1].coefficient - 8.440) < 0.0005);
    assert_true(gauge->rating.highest_gauged_m == 2.38);
    assert_int_equal(gauge->feed_count, 2);
    assert_int_equal(gauge->feeds[0].kind, SETTINGS_FOLDER);
    assert_string_equal(gauge->feeds[0].path, "/var/spool/forewater/incoming/orlin-scar");
    assert_null(gauge->feeds[0].append_file);
    assert_string_equal(gauge->feeds[0].value_column, "stage_m");
    assert_string_equal(gauge->feeds[0].unit, "m");
    assert_false(gauge->feeds[0].has_zone);
    assert_int_equal(gauge->feeds[1].kind, SETTINGS_HTTP);
    assert_string_equal(gauge->feeds[1].readings_pointer, "/data");
    assert_int_equal(gauge->feeds[1].every_s, 300);
    assert_int_equal(gauge->expect_every_s, 900);
    assert_int_equal(gauge->delivery_s, 300);
    assert_int_equal(gauge->blind_after_s, 2700);
    assert_int_equal(gauge->blind_after_rising_s, 1500);
    assert_true(gauge->quality.lowest == 0 && gauge->quality.highest == 9);
    assert_true(gauge->quality.fastest_rise_per_s == 4.0 / 3600);
    assert_true(gauge->quality.confirm_within_s == 900);
    assert_true(gauge->quality.frozen_after_s == 21600 && gauge->quality.frozen_moving_s == 1200);
    assert_true(gauge->quality.resolution == 0.01);
    assert_true(gauge->quality.future_tolerance_s == 120);
    assert_true(gauge->rising_rate_per_s == 0.10 / 3600);
    assert_true(gauge->assumed.carry_rise_s == 5400 && gauge->assumed.recession_time_constant_s == 86400);
    assert_true(gauge->assumed.fastest_rise_per_s == gauge->quality.fastest_rise_per_s);
    assert_string_equal(settings->node_names[gauge->node], "orlin-scar");
    settings_destroy(settings);
}

static void the_points_of_the_example_have_their_marks_and_policies(void **state)
{
    (void)state;
    struct settings *settings = read_sound(SETTINGS_EXAMPLE, SETTINGS_FOR_RUN);
    const struct settings_point *ford = &settings->points[0];
    const struct settings_point *bridge = &settings->points[2];
    assert_int_equal(ford->reach, 0);
    assert_true(ford->at_m == 9400);
    assert_true(ford->invert_m == 104.20);
    assert_int_equal(ford->mark_count, 3);
    assert_int_equal(ford->closing_mark, 0);
    assert_int_equal(ford->deck_mark, 1);
    assert_true(ford->has_crew);
    assert_true(ford->policy.crew_day_s == 2400 && ford->policy.crew_night_s == 3300 && ford->policy.margin_s == 900);
    assert_true(ford->policy.slack_s == 600); /* one cycle and five minutes */
    assert_true(ford->policy.muster_chance == 0.10 && ford->policy.step_down_chance == 0.05);
    assert_true(ford->policy.step_down_dwell_s == 1800 && ford->policy.blind_dead_s == 86400);
    assert_true(ford->policy.reopen_hold_s == 3600 && ford->policy.reopen_return_chance == 0.10);
    assert_true(ford->policy.act_by_shift_s == 600);
    assert_true(ford->reopen_below_m == 0.10);
    assert_int_equal(ford->reopen_and_reclose_s, 7200);
    assert_string_equal(ford->detour_over, "low-pintle-bridge");
    assert_int_equal(ford->access_over_count, 0);
    assert_int_equal(ford->trigger_count, 1);
    assert_int_equal(ford->triggers[0].gauge, 0);
    assert_true(ford->triggers[0].value == 2.0 && ford->triggers[0].needs_rising);
    assert_string_equal(ford->triggers[0].signed_by, "district engineer");
    assert_int_equal(ford->cannot_see_count, 2);
    assert_int_equal(bridge->closing_mark, 1); /* the soffit is not trafficked */
    assert_false(bridge->marks[0].is_trafficked);
    assert_int_equal(bridge->deck_mark, 1);
    assert_true(ford->has_deck && ford->deck.kind == HAZARD_DECK_IN_SECTION);
    assert_true(ford->deck.level_m == 1.55 && ford->deck.roughness_n == 0.016 && ford->deck.panel == 0);
    assert_ptr_equal(ford->deck.section, &settings->sections[0]);
    const struct settings_point *causeway = &settings->points[1];
    assert_true(causeway->has_deck && causeway->deck.kind == HAZARD_DECK_IS_WEIR);
    assert_true(causeway->deck.level_m == 1.95 && causeway->deck.weir_coefficient == 1.6);
    assert_false(bridge->has_deck);
    assert_true(bridge->stage_row_count > 10 && bridge->blocked_row_count > 10);
    settings_destroy(settings);
}

static void the_river_of_the_example_is_ready_for_the_engine(void **state)
{
    (void)state;
    struct settings *settings = read_sound(SETTINGS_EXAMPLE, SETTINGS_FOR_RUN);
    const struct network_river *river = &settings->river;
    assert_int_equal(river->node_count, 4);
    assert_int_equal(river->reach_count, 3);
    assert_int_equal(river->gauge_count, 1);
    assert_int_equal(river->side_inflow_count, 1);
    assert_int_equal(river->point_count, 3);
    assert_int_equal(river->side_inflows[0].reach_index, 1);
    assert_int_equal(river->side_inflows[0].share_of_gauge, 0);
    assert_true(river->side_inflows[0].share == 0.16 && river->side_inflows[0].delay_s == 1500);
    assert_ptr_equal(river->reaches[1].section, &settings->sections[0]);
    assert_int_equal(river->points[2].stage_rating.row_count, settings->points[2].stage_row_count);
    const double factor = 1;
    const struct network_options options = {.time_step_s = 60,
                                            .group_count = 1,
                                            .roughness_factors = &factor,
                                            .members_per_group = 1,
                                            .largest_discharge_m3s = 300};
    struct network *network = NULL;
    struct network_fault fault = {.text = ""};
    assert_int_equal(network_create(river, &options, &network, &fault), FW_OK);
    network_destroy(network);
    settings_destroy(settings);
}

static void what_is_not_stated_has_the_default_of_the_table(void **state)
{
    (void)state;
    struct settings *settings = read_sound(SETTINGS_EVERY_OTHER_KEY, SETTINGS_FOR_RUN);
    assert_int_equal(settings->forecast_every_s, 300);
    assert_int_equal(settings->horizon_s, 43200);
    assert_int_equal(settings->member_count, 400);
    assert_int_equal(settings->night_from_minute, 1200);
    assert_int_equal(settings->night_to_minute, 360);
    assert_true(settings->roughness_factors[0] == 0.8 && settings->roughness_factors[1] == 1.0);
    const struct settings_gauge *scar = &settings->gauges[1];
    assert_string_equal(scar->name, "orlin-scar");
    assert_true(isnan(scar->zero_m));
    assert_int_equal(scar->blind_after_s, 2700);
    assert_true(isinf(scar->quality.lowest) && scar->quality.lowest < 0 && isinf(scar->quality.highest));
    assert_true(scar->quality.fastest_fall_per_s == scar->quality.fastest_rise_per_s);
    assert_true(scar->quality.fastest_rise_per_s == 3.7 / 3600);
    assert_true(isinf(scar->rating.highest_gauged_m));
    assert_int_equal(scar->rating.table_count, 3);
    const struct settings_point *meeting = &settings->points[0];
    assert_false(meeting->has_crew);
    assert_true(meeting->policy.muster_chance == 0.10);
    assert_int_equal(meeting->deck_mark, 0);
    assert_int_equal(meeting->reopen_and_reclose_s, 7200);
    settings_destroy(settings);
}

static void a_weir_over_the_road_becomes_a_structure_and_rows(void **state)
{
    (void)state;
    struct settings *settings = read_sound(SETTINGS_EVERY_OTHER_KEY, SETTINGS_FOR_RUN);
    const struct settings_point *causeway = &settings->points[3];
    assert_non_null(causeway->structure);
    assert_ptr_equal(settings->river.points[3].structure, causeway->structure);
    assert_int_equal(settings->river.points[3].stage_rating.row_count, 0); /* the network makes its own per group */
    assert_int_equal(causeway->structure->opening_count, 2);
    const struct stage_opening *road = &causeway->structure->openings[0];
    assert_true(road->depth_m[0] == 1.85 && road->open_share == 1.0);
    assert_int_equal(causeway->structure->openings[1].row_count, 4);
    assert_true(causeway->structure->openings[1].depth_m[0] == 0.2);
    assert_true(causeway->deck.weir_coefficient == 1.5); /* the deck has the rating's */
    assert_true(causeway->deck.level_m == 1.8);
    /* both sets of rows begin at the sill; blocked, the same flow stands higher */
    assert_true(causeway->stage_row_stage_m[0] == 0.2 && causeway->blocked_row_stage_m[0] == 0.2);
    assert_true(causeway->stage_row_count > 64 && causeway->blocked_row_count > 64);
    size_t last = causeway->stage_row_count - 1;
    assert_true(causeway->stage_row_discharge_m3s[last] > 23 * 1.5 * pow(10.0, 1.5));
    settings_destroy(settings);
}

static void a_gauge_of_discharge_has_its_own_keys(void **state)
{
    (void)state;
    struct settings *settings = read_sound(SETTINGS_EVERY_OTHER_KEY, SETTINGS_FOR_RUN);
    const struct settings_gauge *beck = &settings->gauges[0];
    assert_int_equal(beck->measures, SETTINGS_DISCHARGE);
    assert_false(beck->has_rating);
    assert_true(beck->rising_rate_per_s == 0.7 / 3600);
    assert_true(beck->quality.fastest_rise_per_s == 37.0 / 3600);
    assert_true(beck->quality.fastest_fall_per_s == 22.0 / 3600);
    assert_true(beck->quality.moving_rate_per_s == 0.9 / 3600);
    assert_true(beck->quality.resolution == 0.02);
    assert_string_equal(beck->feeds[0].append_file, "sethick.csv");
    assert_string_equal(beck->feeds[0].unit, "l/s");
    assert_true(beck->feeds[0].has_zone);
    assert_int_equal(beck->feeds[0].zone.offset_s, 3600);
    assert_true(settings->points[1].triggers[0].value == 23.7);
    assert_false(settings->points[1].triggers[0].needs_rising);
    settings_destroy(settings);
}

static void an_outlet_holds_a_level_by_the_full_equations(void **state)
{
    (void)state;
    struct settings *settings = read_sound(SETTINGS_OUTLET, SETTINGS_FOR_ROUTE);
    assert_int_equal(settings->river.reaches[0].method, NETWORK_AUTO); /* it says nothing */
    assert_true(settings->river.reaches[0].outlet_depth_m == 5.0);
    settings_destroy(settings);
    settings = read_sound(SETTINGS_EXAMPLE, SETTINGS_FOR_RUN);
    assert_int_equal(settings->river.reaches[0].method, NETWORK_AUTO);
    assert_true(settings->river.reaches[0].outlet_depth_m == 0.0);
    settings_destroy(settings);
}

static void an_outlet_follows_a_gauge_or_a_series(void **state)
{
    (void)state;
    struct settings *settings = read_sound(SETTINGS_BOUNDARIES, SETTINGS_FOR_ROUTE);
    const struct network_river *river = &settings->river;
    assert_int_equal(river->level_count, 3);
    assert_int_equal(settings->level_count, 3);
    assert_true(river->reaches[2].has_outlet_level && river->reaches[2].outlet_level == 0);
    assert_int_equal(settings->levels[0].reach, 2);
    assert_int_equal(settings->levels[0].gauge, 4);
    assert_true(settings->levels[0].bed_at_m == 31.4);
    assert_true(settings->gauges[4].gives_level_only);
    assert_int_equal(settings->gauges[4].node, SETTINGS_NONE);
    const struct settings_level *tide = &settings->levels[1], *sluice = &settings->levels[2];
    assert_int_equal(tide->gauge, SETTINGS_NONE);
    assert_int_equal(tide->row_count, 2);
    assert_false(tide->is_in_seconds);
    assert_true(tide->time_s[1] - tide->time_s[0] == 3600.0);
    assert_true(tide->stage_m[0] == 1.25 && tide->stage_m[1] == 1.5);
    assert_true(sluice->is_in_seconds && sluice->time_s[1] == 900.0 && sluice->stage_m[1] == -0.5);
    settings_destroy(settings);
}

static void a_foot_may_have_a_structure_and_a_drop(void **state)
{
    (void)state;
    struct settings *settings = read_sound(SETTINGS_BOUNDARIES, SETTINGS_FOR_ROUTE);
    const struct network_reach *beck = &settings->river.reaches[1];
    assert_true(beck->foot_drop_m == 0.4);
    assert_non_null(beck->foot_structure);
    assert_int_equal(beck->foot_structure->opening_count, 2);
    assert_true(beck->foot_structure->openings[0].open_share == 0.6);
    /* 0.6 of the culvert's 3.5 m3/s; and 1.6 x 24 x 0.9^1.5 over the weir, within its table's 0.02 % */
    assert_true(fabs(stage_structure_flow(beck->foot_structure, 0.9, -1.0).discharge_m3s - 2.1) <= 1e-12);
    double over = stage_structure_flow(beck->foot_structure, 3.0, -1.0).discharge_m3s - 0.6 * (8.0 + 4.5 * 1.1);
    assert_true(fabs(over / (1.6 * 24.0 * pow(0.9, 1.5)) - 1.0) <= 3e-4);
    assert_null(settings->river.reaches[0].foot_structure);
    settings_destroy(settings);
}

static void a_gauge_may_stand_in_mid_river(void **state)
{
    (void)state;
    struct settings *settings = read_sound(SETTINGS_BOUNDARIES, SETTINGS_FOR_ROUTE);
    assert_int_equal(settings->gauges[1].node, settings->river.reaches[0].to_node);
    assert_true(network_gauge_is_inner(&settings->river, 1));
    assert_false(network_gauge_is_inner(&settings->river, 0));
    bool is_above[6];
    settings_gauges_above(settings, 0, is_above);
    assert_true(is_above[0] && is_above[1] && !is_above[2] && !is_above[3] && !is_above[4] && is_above[5]);
    settings_destroy(settings);
}

static void a_point_stands_at_its_node_or_where_it_is_put(void **state)
{
    (void)state;
    struct settings *settings = read_sound(SETTINGS_EVERY_OTHER_KEY, SETTINGS_FOR_RUN);
    /* two reaches end at "meeting": only the one that leaves carries both */
    assert_int_equal(settings->points[0].reach, 2);
    assert_true(settings->points[0].at_m == 0);
    assert_int_equal(settings->points[1].reach, 2);
    assert_true(settings->points[1].at_m == 4700);
    assert_int_equal(settings->points[1].closing_mark, 1);
    assert_int_equal(settings->points[1].deck_mark, 1);                               /* no deck: the closing mark */
    assert_true(settings->points[2].has_deck && settings->points[2].deck.panel == 1); /* right of 9.7 m */
    assert_true(settings->points[2].deck.roughness_n == 0.013);
    assert_int_equal(settings->sections[0].shape, SECTION_POINTS);
    assert_int_equal(settings->sections[0].point_count, 5);
    assert_int_equal(settings->sections[0].panel_count, 2);
    assert_int_equal(settings->sections[1].shape, SECTION_WIDE);
    assert_int_equal(settings->sections[2].shape, SECTION_RECTANGLE);
    assert_int_equal(settings->river.reaches[0].method, NETWORK_KINEMATIC);
    assert_true(settings->river.reaches[0].cell_m == 370);
    assert_true(settings->river.side_inflows[0].constant_m3s == 0.43);
    assert_true(settings->river.side_inflows[0].share_of_gauge == NETWORK_NONE);
    settings_destroy(settings);
}

static void gauges_above_a_point_are_those_whose_water_passes_it(void **state)
{
    (void)state;
    bool is_upstream[2];
    struct settings *settings = read_sound(SETTINGS_EVERY_OTHER_KEY, SETTINGS_FOR_RUN);
    settings_gauges_above(settings, 1, is_upstream);
    assert_true(is_upstream[0] && is_upstream[1]);
    settings_destroy(settings);

    struct text text = settings_text_load(SETTINGS_EVERY_OTHER_KEY);
    const char *place = strstr(text.bytes, "\"lower\", \"at_m\": 4700");
    struct text changed = settings_text_with(&text, (size_t)(place - text.bytes), 21, "\"beck-foot\", \"at_m\": 470");
    struct settings_faults faults = {0};
    assert_int_equal(settings_text_read(&changed, SETTINGS_FOR_RUN, &settings, &faults), FW_OK);
    settings_gauges_above(settings, settings_point_index(settings, "mill-ford"), is_upstream);
    assert_true(is_upstream[0]);
    assert_false(is_upstream[1]);
    settings_destroy(settings);
    text_clear(&changed);
    text_clear(&text);
}

static void things_are_found_by_id(void **state)
{
    (void)state;
    struct settings *settings = read_sound(SETTINGS_EXAMPLE, SETTINGS_FOR_RUN);
    assert_int_equal(settings_gauge_index(settings, "orlin-scar"), 0);
    assert_int_equal(settings_point_index(settings, "low-pintle-bridge"), 2);
    assert_true(settings_gauge_index(settings, "low-pintle-bridge") == SETTINGS_NONE);
    assert_true(settings_point_index(settings, "") == SETTINGS_NONE);
    settings_destroy(settings);
}

static void relative_paths_start_at_the_folder_of_the_file(void **state)
{
    (void)state;
    struct text text = settings_text_load(SETTINGS_EVERY_OTHER_KEY);
    static const struct {
        const char *file, *folder;
    } cases[] = {
        {"/etc/forewater/x.json", "/etc/forewater"}, {"/x.json", ""}, {"sub/x.json", NULL}, {"x.json", NULL}};
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        struct settings *settings;
        struct settings_faults faults = {0};
        struct fw_error error = {0};
        char here[1000], folder[1100], expected[1200];
        assert_non_null(getcwd(here, sizeof here));
        snprintf(folder, sizeof folder, "%s%s", cases[i].folder != NULL ? cases[i].folder : here,
                 cases[i].file[0] == 's' ? "/sub" : "");
        assert_int_equal(
            settings_read_text(cases[i].file, text.bytes, text.length, SETTINGS_FOR_RUN, &settings, &faults, &error),
            FW_OK);
        snprintf(expected, sizeof expected, "%s/x.json", folder);
        assert_string_equal(settings->file, expected);
        snprintf(expected, sizeof expected, "%s/store/history.db", folder);
        assert_string_equal(settings->store_file, expected);
        snprintf(expected, sizeof expected, "%s/store/inbox", folder);
        assert_string_equal(settings->inbox_path, expected);
        snprintf(expected, sizeof expected, "%s/drop", folder);
        assert_string_equal(settings->gauges[0].feeds[0].path, expected);
        settings_destroy(settings);
    }
    text_clear(&text);
}

/* Against sha256sum of GNU coreutils. */
static void the_digest_is_sha_256_of_the_text(void **state)
{
    (void)state;
    char line[100] = "";
    FILE *output = popen("sha256sum '" SETTINGS_EXAMPLE "'", "r");
    assert_non_null(output);
    assert_non_null(fgets(line, sizeof line, output));
    pclose(output);
    line[64] = '\0';
    struct settings *settings = read_sound(SETTINGS_EXAMPLE, SETTINGS_FOR_RUN);
    assert_string_equal(settings->digest, line);
    struct text text = settings_text_load(SETTINGS_EXAMPLE);
    assert_int_equal(settings->text_length, text.length);
    assert_memory_equal(settings->text, text.bytes, text.length);
    text_clear(&text);
    settings_destroy(settings);
}

/* --- enough for routing from files is not enough for the daemon --- */

static const char ROUTE_ONLY[] =
    "{ \"gauges\": [ { \"id\": \"head\" } ],\n"
    "  \"sections\": [ { \"id\": \"s\", \"shape\": \"wide\", \"bottom_m\": 30, \"n\": 0.03 } ],\n"
    "  \"reaches\": [ { \"id\": \"r\", \"from\": \"head\", \"to\": \"foot\", \"length_m\": 5000, \"slope\": 0.001,\n"
    "    \"section\": \"s\" } ],\n"
    "  \"points\": [ { \"id\": \"foot\" } ] }\n";

static void a_file_with_a_river_alone_is_enough_to_route(void **state)
{
    (void)state;
    struct text text = {0};
    text_add(&text, "%s", ROUTE_ONLY);
    struct settings *settings;
    struct settings_faults faults = {0};
    assert_int_equal(settings_text_read(&text, SETTINGS_FOR_ROUTE, &settings, &faults), FW_OK);
    assert_null(settings->store_file);
    assert_null(settings->district_name);
    assert_int_equal(when_offset_s(&settings->zone, 0), 0);
    assert_false(settings->gauges[0].has_rating);
    assert_true(isnan(settings->points[0].invert_m));
    assert_int_equal(settings->points[0].mark_count, 0);
    assert_true(settings->points[0].closing_mark == SETTINGS_NONE);
    assert_true(settings->points[0].at_m == 5000);
    settings_destroy(settings);

    assert_int_equal(settings_text_read(&text, SETTINGS_FOR_RUN, &settings, &faults), FW_BAD_INPUT);
    static const char *const missing[] = {
        "x.json:1: district: missing: expected an object",
        "x.json:1: store: missing: expected an object",
        "x.json:1: gauges[0].rating: missing: expected an object in { }, because the gauge measures stage",
        "x.json:1: gauges[0].quality: missing",
        "x.json:1: gauges: no gauge has a feed",
        "x.json:5: points[0].marks: missing",
        "x.json:5: points[0].invert_m: missing",
    };
    for (size_t i = 0; i < sizeof missing / sizeof missing[0]; i++)
        if (settings_text_fault(&faults, missing[i]) == NULL) {
            settings_text_print_faults(&faults);
            fail_msg("no fault '%s'", missing[i]);
        }
    assert_int_equal(faults.count, sizeof missing / sizeof missing[0]);
    settings_faults_clear(&faults);
    text_clear(&text);
}

/* --- files that cannot be read --- */

static enum fw_status read_path(const char *path, struct settings_faults *faults, struct fw_error *error)
{
    struct settings *settings = NULL;
    enum fw_status status = settings_read_file(path, SETTINGS_FOR_RUN, &settings, faults, error);
    assert_null(settings);
    assert_non_null(strstr(error->text, path));
    return status;
}

static void a_file_that_is_not_there_or_no_file_is_unavailable(void **state)
{
    (void)state;
    static const char *const paths[] = {"/nonexistent/forewater.json", "/", "/dev/null"};
    for (size_t i = 0; i < sizeof paths / sizeof paths[0]; i++) {
        struct settings_faults faults = {0};
        struct fw_error error = {0};
        assert_int_equal(read_path(paths[i], &faults, &error), FW_UNAVAILABLE);
        assert_int_equal(faults.count, 0);
    }
}

static void a_fifo_does_not_block(void **state)
{
    (void)state;
    char folder[] = "/tmp/forewater-settings-XXXXXX";
    char path[100];
    struct settings_faults faults = {0};
    struct fw_error error = {0};
    assert_non_null(mkdtemp(folder));
    snprintf(path, sizeof path, "%s/fifo", folder);
    assert_int_equal(mkfifo(path, 0600), 0);
    assert_int_equal(read_path(path, &faults, &error), FW_UNAVAILABLE);
    unlink(path);
    rmdir(folder);
}

static void a_file_beyond_all_measure_is_refused(void **state)
{
    (void)state;
    struct settings *settings;
    struct settings_faults faults = {0};
    struct text text = {0};
    for (int i = 0; i < (1 << 14); i++)
        text_add(&text, "%64s", "");
    text_add(&text, " ");
    assert_int_equal(settings_text_read(&text, SETTINGS_FOR_RUN, &settings, &faults), FW_BAD_INPUT);
    assert_string_equal(faults.faults[0].text, "x.json:1: the file has 1048577 bytes: expected at most 1048576");
    settings_faults_clear(&faults);
    text_clear(&text);
}

/* --- all faults in one run --- */

static void all_faults_come_in_one_run_in_the_order_of_their_lines(void **state)
{
    (void)state;
    static const char text_bytes[] =
        "{ \"district\": { \"name\": \"\", \"zone\": \"+1\" },\n"
        "  \"store\": 7,\n"
        "  \"gauges\": [ { \"id\": \"head\", \"expect_every_min\": 01,\n"
        "    \"blind_aftr_min\": 45 } ],\n"
        "  \"points\": [ { \"id\": \"nowhere\",\n"
        "    \"detour_over\": \"nowhere-else\" }, ],\n"
        "  \"reaches\": [ { \"id\": \"r\", \"from\": \"haed\", \"to\": \"foot\", \"length_m\": 5000,\n"
        "    \"slope\": -0.001, \"section\": \"t\" } ],\n"
        "  \"sections\": [ { \"id\": \"s\", \"shape\": \"round\", \"n\": 0.03 } ] }\n";
    static const char *const expected[] = {
        "x.json:1: district.name: \"\" cannot be used: expected a text of 1 to 60 bytes on one line",
        "x.json:1: district.zone: \"+1\" cannot be used: expected a zone",
        "x.json:1: district.datum: missing",
        "x.json:2: store: 7 is not an object",
        "x.json:3: gauges[0].expect_every_min: 01 starts with a needless 0",
        "x.json:3: gauges[0].quality: missing",
        "x.json:3: gauges[0].id: \"head\" stands at no reach",
        "x.json:4: gauges[0].blind_aftr_min: unknown key: expected 'blind_after_min'?",
        "x.json:5: points[0].invert_m: missing",
        "x.json:5: points[0].id: \"nowhere\" is not where a reach ends",
        "x.json:6: a comma before ']'",
        "x.json:6: points[0].detour_over: \"nowhere-else\" is not the id of a point",
        "x.json:7: reaches[0].from: \"haed\" has no inflow: expected a gauge, or a node where another reach ends",
        "x.json:8: reaches[0].slope: -0.001 is too small",
        "x.json:8: reaches[0].section: \"t\" is not the id of a section",
        "x.json:9: sections[0].shape: \"round\" cannot be used: expected one of \"wide\", \"rectangle\"",
    };
    struct settings *settings;
    struct settings_faults faults = {0};
    struct text text = {0};
    text_add(&text, "%s", text_bytes);
    assert_int_equal(settings_text_read(&text, SETTINGS_FOR_RUN, &settings, &faults), FW_BAD_INPUT);
    for (size_t i = 0; i < sizeof expected / sizeof expected[0]; i++)
        if (settings_text_fault(&faults, expected[i]) == NULL) {
            settings_text_print_faults(&faults);
            fail_msg("no fault '%s'", expected[i]);
        }
    for (size_t i = 1; i < faults.count; i++)
        assert_true(faults.faults[i - 1].line <= faults.faults[i].line);
    settings_faults_clear(&faults);
    text_clear(&text);
}

static void faults_beyond_the_first_two_hundred_are_counted(void **state)
{
    (void)state;
    struct settings *settings;
    struct settings_faults faults = {0};
    struct fw_error error = {0};
    struct text text = {0};
    text_add(&text, "{");
    for (int i = 0; i < 300; i++)
        text_add(&text, "%s\"unheard-of-%d\": 0", i > 0 ? ",\n" : "", i);
    text_add(&text, "}");
    assert_int_equal(
        settings_read_text("x.json", text.bytes, text.length, SETTINGS_FOR_ROUTE, &settings, &faults, &error),
        FW_BAD_INPUT);
    assert_int_equal(faults.count, 200);
    assert_non_null(strstr(error.text, "x.json has 303 faults; the first: x.json:1: ")); /* 3 keys are missing too */
    settings_faults_clear(&faults);
    text_clear(&text);
}

static void a_long_path_does_not_push_out_what_is_wrong(void **state)
{
    (void)state;
    char path[700];
    struct settings *settings;
    struct settings_faults faults = {0};
    struct fw_error error = {0};
    snprintf(path, sizeof path, "/%0600d/x.json", 0);
    assert_int_equal(settings_read_text(path, "{\n", 2, SETTINGS_FOR_ROUTE, &settings, &faults, &error),
                     FW_BAD_INPUT);
    assert_string_equal(faults.faults[0].text, "x.json:2: the file ends here: expected a key in double quotes");
    settings_faults_clear(&faults);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_example_becomes_the_district_it_describes),
        cmocka_unit_test(the_gauge_of_the_example_has_its_limits_in_si),
        cmocka_unit_test(the_points_of_the_example_have_their_marks_and_policies),
        cmocka_unit_test(the_river_of_the_example_is_ready_for_the_engine),
        cmocka_unit_test(what_is_not_stated_has_the_default_of_the_table),
        cmocka_unit_test(a_weir_over_the_road_becomes_a_structure_and_rows),
        cmocka_unit_test(a_gauge_of_discharge_has_its_own_keys),
        cmocka_unit_test(an_outlet_holds_a_level_by_the_full_equations),
        cmocka_unit_test(an_outlet_follows_a_gauge_or_a_series),
        cmocka_unit_test(a_foot_may_have_a_structure_and_a_drop),
        cmocka_unit_test(a_gauge_may_stand_in_mid_river),
        cmocka_unit_test(a_point_stands_at_its_node_or_where_it_is_put),
        cmocka_unit_test(gauges_above_a_point_are_those_whose_water_passes_it),
        cmocka_unit_test(things_are_found_by_id),
        cmocka_unit_test(relative_paths_start_at_the_folder_of_the_file),
        cmocka_unit_test(the_digest_is_sha_256_of_the_text),
        cmocka_unit_test(a_file_with_a_river_alone_is_enough_to_route),
        cmocka_unit_test(a_file_that_is_not_there_or_no_file_is_unavailable),
        cmocka_unit_test(a_fifo_does_not_block),
        cmocka_unit_test(a_file_beyond_all_measure_is_refused),
        cmocka_unit_test(all_faults_come_in_one_run_in_the_order_of_their_lines),
        cmocka_unit_test(faults_beyond_the_first_two_hundred_are_counted),
        cmocka_unit_test(a_long_path_does_not_push_out_what_is_wrong),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
