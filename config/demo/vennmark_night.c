/* SPDX-License-Identifier: MIT */
/*
 * Generates the Vennmark night from its recipe: what truly happened, what the feed made of it, what people said, and
 * what is expected of whoever watches. See docs/demo.md.
 *
 *     vennmark_night --into FOLDER [--variant A|C]  writes the files of night_files.h
 *     vennmark_night --check                        compares the routed truth with the recipe's; fails when they part
 *     vennmark_night --print-stage-rating           the bridge's rows for the configuration
 */
#include <getopt.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sysexits.h>

#include "config/demo/bridge_table.h"
#include "config/demo/expected.h"
#include "config/demo/night_files.h"
#include "config/demo/night_time.h"
#include "config/demo/recipe.h"
#include "config/demo/story.h"
#include "config/demo/truth.h"

struct wish {
    const char *into;
    enum recipe_variant variant;
    int checks, prints_stage_rating, shows_help;
};

static void print_usage(FILE *stream)
{
    fputs("usage: vennmark_night --into FOLDER [--variant A|C]\n"
          "       vennmark_night --check\n"
          "       vennmark_night --print-stage-rating\n"
          "  --variant C  the gauge's flow times 1.35, so that the flood plain is used\n",
          stream);
}

/* 0, or the exit code of a command line that cannot be read. */
static int read_wish(int argument_count, char *arguments[], struct wish *wish_out)
{
    static const struct option options[] = {
        {"into", required_argument, NULL, 'i'}, {"variant", required_argument, NULL, 'v'},
        {"check", no_argument, NULL, 'c'},      {"print-stage-rating", no_argument, NULL, 'p'},
        {"help", no_argument, NULL, 'h'},       {NULL, 0, NULL, 0}};
    struct wish wish = {.variant = RECIPE_VARIANT_A};
    for (int option; (option = getopt_long(argument_count, arguments, "", options, NULL)) != -1;) {
        switch (option) {
        case 'i':
            wish.into = optarg;
            break;
        case 'v':
            if (strcmp(optarg, "A") != 0 && strcmp(optarg, "C") != 0) {
                fprintf(stderr,
                        "vennmark_night: --variant %s: there is A, the night as told, and C, with more water\n",
                        optarg);
                return EX_USAGE;
            }
            wish.variant = strcmp(optarg, "C") == 0 ? RECIPE_VARIANT_C : RECIPE_VARIANT_A;
            break;
        case 'c':
            wish.checks = 1;
            break;
        case 'p':
            wish.prints_stage_rating = 1;
            break;
        case 'h':
            wish.shows_help = 1;
            break;
        default:
            print_usage(stderr);
            return EX_USAGE;
        }
    }
    if (optind < argument_count ||
        (wish.into == NULL && !wish.checks && !wish.prints_stage_rating && !wish.shows_help)) {
        print_usage(stderr);
        return EX_USAGE;
    }
    *wish_out = wish;
    return 0;
}

static int print_stage_rating(const struct recipe *recipe)
{
    struct bridge_table clean, part_blocked;
    if (bridge_table_make(recipe, recipe_bridge_level_m, &clean) != FW_OK ||
        bridge_table_make(recipe, recipe_bridge_part_blocked_level_m, &part_blocked) != FW_OK) {
        fprintf(stderr, "vennmark_night: more than %d rows\n", BRIDGE_TABLE_ROWS_MAX);
        return EX_SOFTWARE;
    }
    bridge_table_print(&clean, "clean", ",");
    bridge_table_print(&part_blocked, "part_blocked", "");
    return 0;
}

static int write_night(const struct recipe *recipe, const struct truth *truth, const char *into)
{
    struct story *story = calloc(1, sizeof *story);
    if (story == NULL)
        return EX_OSERR;
    story_tell_feed(recipe, story);
    story_tell_words(recipe, truth, story);
    int exit_code = 0;
    if (!night_files_write(recipe, truth, story, into))
        exit_code = EX_CANTCREAT;
    else
        printf("%zu readings and %zu words written into %s\n", story->delivery_count, story->word_count, into);
    free(story);
    return exit_code;
}

int main(int argument_count, char *arguments[])
{
    struct wish wish;
    int exit_code = read_wish(argument_count, arguments, &wish);
    if (exit_code != 0)
        return exit_code;
    if (wish.shows_help) {
        print_usage(stdout);
        return 0;
    }
    struct recipe recipe = recipe_vennmark(wish.variant);
    if (wish.prints_stage_rating)
        return print_stage_rating(&recipe);

    struct truth truth;
    if (truth_route(&recipe, &truth) != FW_OK)
        return EX_SOFTWARE;
    if (wish.into != NULL)
        exit_code = write_night(&recipe, &truth, wish.into);
    if (exit_code == 0 && wish.checks && !recipe.is_as_told) {
        fprintf(stderr, "vennmark_night: --check: the recipe gives the truth of variant A alone\n");
        exit_code = EX_USAGE;
    } else if (exit_code == 0 && wish.checks) {
        exit_code = expected_compare_truth(&recipe, &truth) ? 0 : EXIT_FAILURE;
    }
    truth_clear(&truth);
    return exit_code;
}
