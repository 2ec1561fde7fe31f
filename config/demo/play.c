/* SPDX-License-Identifier: MIT */
/*
 * Plays the night that vennmark_night wrote through the daemon itself, fast: the gauge by drop folder and by HTTP,
 * people by `forewater say`, the world's clock moved on only when the daemon has nothing pending. See docs/demo.md.
 *
 *     play --forewater FILE --config FILE --hook FILE --night FOLDER --work FOLDER [--until TIME] [--short]
 *
 * Fails when the daemon died or would not answer, a word was refused, a cycle failed or was not recorded, or nothing
 * was told.
 */
#include <errno.h>
#include <getopt.h>
#include <limits.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <sysexits.h>
#include <unistd.h>

#include "config/demo/crossings.h"
#include "config/demo/driven_daemon.h"
#include "config/demo/gauge_page.h"
#include "config/demo/night_script.h"
#include "config/demo/night_time.h"
#include "config/demo/play_config.h"
#include "config/demo/told.h"

static const char drop_folder[] = "drop/orlin-scar";

struct play {
    char forewater[PATH_MAX], hook[PATH_MAX], night[PATH_MAX]; /* absolute: the player works in its folder */
    const char *config, *work;
    int64_t until_utc_s;
    bool is_short;

    struct night_script script;
    struct crossings crossings;
    struct gauge_page *page;
    struct driven_daemon daemon;
    struct told told;
    size_t delivered; /* deliveries handed over so far */
    size_t spoken;    /* words said so far */
    size_t steps, files, refused;
};

static void print_usage(FILE *stream)
{
    fputs("usage: play --forewater FILE --config FILE --hook FILE --night FOLDER --work FOLDER [--until TIME] "
          "[--short]\n"
          "  --work   an empty or missing folder; its parent must be there\n"
          "  --until  world time (RFC 3339) at which to stop; otherwise the end of the night\n"
          "  --short  only the text messages, not the bulletins\n",
          stream);
}

static bool make_absolute(const char *option, const char *path, char absolute_out[PATH_MAX])
{
    if (path != NULL && realpath(path, absolute_out) != NULL)
        return true;
    fprintf(stderr, "play: --%s %s: %s\n", option, path != NULL ? path : "",
            path != NULL ? strerror(errno) : "is missing");
    return false;
}

static int read_options(int argument_count, char *arguments[], struct play *play)
{
    static const struct option options[] = {
        {"forewater", required_argument, NULL, 'f'}, {"config", required_argument, NULL, 'c'},
        {"hook", required_argument, NULL, 'k'},      {"night", required_argument, NULL, 'n'},
        {"work", required_argument, NULL, 'w'},      {"until", required_argument, NULL, 'u'},
        {"short", no_argument, NULL, 's'},           {NULL, 0, NULL, 0}};
    const char *forewater = NULL, *hook = NULL, *night = NULL;
    play->until_utc_s = NIGHT_TIME_NEVER;
    for (int option; (option = getopt_long(argument_count, arguments, "", options, NULL)) != -1;) {
        switch (option) {
        case 'f':
            forewater = optarg;
            break;
        case 'c':
            play->config = optarg;
            break;
        case 'k':
            hook = optarg;
            break;
        case 'n':
            night = optarg;
            break;
        case 'w':
            play->work = optarg;
            break;
        case 'u':
            if (!night_time_parse(optarg, &play->until_utc_s)) {
                fprintf(stderr, "play: --until %s: expected a time like 2031-02-14T22:30:00+01:00\n", optarg);
                return EX_USAGE;
            }
            break;
        case 's':
            play->is_short = true;
            break;
        default:
            print_usage(stderr);
            return EX_USAGE;
        }
    }
    if (play->config == NULL || play->work == NULL || optind < argument_count) {
        print_usage(stderr);
        return EX_USAGE;
    }
    if (!make_absolute("forewater", forewater, play->forewater) || !make_absolute("hook", hook, play->hook) ||
        !make_absolute("night", night, play->night))
        return EX_NOINPUT;
    return 0;
}

/* --- setting the stage ------------------------------------------------------------------------------------------ */

static bool make_folder(const char *path)
{
    if (mkdir(path, 0777) == 0 || errno == EEXIST)
        return true;
    fprintf(stderr, "play: %s: %s\n", path, strerror(errno));
    return false;
}

static bool enter_work_folder(const char *work)
{
    if (!make_folder(work))
        return false;
    if (chdir(work) != 0) {
        fprintf(stderr, "play: %s: %s\n", work, strerror(errno));
        return false;
    }
    if (access(DRIVEN_DAEMON_CONFIG, F_OK) == 0) {
        fprintf(stderr, "play: %s holds an earlier run; give another folder, or remove it\n", work);
        return false;
    }
    return make_folder("drop") && make_folder(drop_folder) && make_folder("outgoing");
}

static bool set_stage(struct play *play)
{
    char *config = play_config_read(play->config);
    bool is_set = config != NULL && night_script_read(play->night, &play->script) && enter_work_folder(play->work) &&
                  (play->page = gauge_page_open()) != NULL;
    struct play_config_places places = {
        .port = is_set ? gauge_page_port(play->page) : 0, .hook = play->hook, .told_file = TOLD_FILE};
    is_set = is_set && play_config_write(config, &places, DRIVEN_DAEMON_CONFIG) &&
             crossings_read(config, &play->crossings);
    free(config);
    told_begin(&play->told, !play->is_short);
    return is_set;
}

/* --- one step of the world -------------------------------------------------------------------------------------- */

static bool drop_file(struct play *play, size_t from, size_t to)
{
    char beside[64], target[128];
    snprintf(beside, sizeof beside, "outgoing/orlin-scar-%04zu.csv", play->files);
    snprintf(target, sizeof target, "%s/orlin-scar-%04zu.csv", drop_folder, play->files);
    FILE *stream = fopen(beside, "w");
    if (stream == NULL) {
        fprintf(stderr, "play: %s: %s\n", beside, strerror(errno));
        return false;
    }
    fputs("observed,stage_m\n", stream);
    for (size_t i = from; i < to; i++)
        if (play->script.deliveries[i].is_by_folder)
            fprintf(stream, "%s,%s\n", play->script.deliveries[i].observed, play->script.deliveries[i].stage_m);
    bool is_dropped = ferror(stream) == 0;
    is_dropped &= fclose(stream) == 0;
    is_dropped =
        is_dropped && rename(beside, target) == 0; /* renamed in whole: the daemon need not wait for it to settle */
    if (!is_dropped)
        fprintf(stderr, "play: %s: %s\n", target, strerror(errno));
    play->files++;
    return is_dropped;
}

static bool deliver_until(struct play *play, int64_t utc_s)
{
    size_t from = play->delivered;
    bool is_for_folder = false;
    while (play->delivered < play->script.delivery_count &&
           play->script.deliveries[play->delivered].received_utc_s <= utc_s) {
        const struct script_delivery *delivery = &play->script.deliveries[play->delivered++];
        is_for_folder |= delivery->is_by_folder;
        if (delivery->is_by_http)
            gauge_page_add(play->page, delivery->observed_utc_s, delivery->stage_m);
    }
    return !is_for_folder || drop_file(play, from, play->delivered);
}

static void set_reach(struct play *play, int64_t utc_s)
{
    bool is_in_reach = true;
    for (size_t i = 0; i < play->script.outage_count; i++)
        if (utc_s >= play->script.outages[i].from_utc_s && utc_s < play->script.outages[i].to_utc_s)
            is_in_reach = false;
    gauge_page_set_in_reach(play->page, is_in_reach);
}

/* Spoken as it happens: the daemon stamps it with the world's time. */
static void say(struct play *play, const struct script_word *word)
{
    static char command[] = "say", config[] = "--config", config_file[] = DRIVEN_DAEMON_CONFIG;
    char clock[NIGHT_TIME_SIZE];
    char *arguments[SCRIPT_PARTS_MAX + 4] = {command};
    size_t count = 1;
    printf("\n%s  say", night_time_clock(word->at_utc_s, clock));
    for (size_t i = 0; i < word->part_count; i++) {
        arguments[count++] = word->parts[i];
        printf(strchr(word->parts[i], ' ') != NULL ? " '%s'" : " %s", word->parts[i]);
    }
    putchar('\n');
    arguments[count++] = config;
    arguments[count++] = config_file;
    int exit_code = driven_daemon_command(&play->daemon, arguments);
    if (exit_code != 0) {
        fprintf(stderr, "play: the word was not taken (exit code %d)\n", exit_code);
        play->refused++;
    } else if (word->part_count > 2 && strcmp(word->parts[0], "road") == 0 && strcmp(word->parts[2], "SHUT") == 0) {
        told_shut(&play->told, &play->crossings, word->parts[1], word->at_utc_s);
    }
}

/* Says what is due; what came of it has been told when this returns. */
static bool speak_until(struct play *play, int64_t utc_s)
{
    bool goes_on = true;
    while (goes_on && play->spoken < play->script.word_count && play->script.words[play->spoken].at_utc_s <= utc_s) {
        say(play, &play->script.words[play->spoken++]);
        goes_on = driven_daemon_advance(&play->daemon, utc_s) && told_take_new(&play->told, &play->crossings, utc_s);
    }
    return goes_on;
}

static bool step(struct play *play, int64_t utc_s)
{
    play->steps++;
    set_reach(play, utc_s);
    return deliver_until(play, utc_s) && driven_daemon_advance(&play->daemon, utc_s) &&
           told_take_new(&play->told, &play->crossings, utc_s) && speak_until(play, utc_s);
}

/*
 * Every moment at which a cycle is due or something happens, in order: no result depends on how fast this machine is.
 */
static bool play_night(struct play *play)
{
    int64_t cycle_s = play->crossings.cycle_s;
    int64_t utc_s = night_script_next(&play->script, night_script_start(&play->script) - 1);
    if (!driven_daemon_start(&play->daemon, play->forewater, utc_s) || !step(play, utc_s))
        return false;
    for (;;) {
        int64_t happens_utc_s = night_script_next(&play->script, utc_s);
        int64_t cycle_utc_s = utc_s - utc_s % cycle_s + cycle_s;
        utc_s = happens_utc_s < cycle_utc_s ? happens_utc_s : cycle_utc_s;
        if (happens_utc_s == NIGHT_TIME_NEVER || utc_s > play->until_utc_s)
            return true;
        if (!step(play, utc_s))
            return false;
    }
}

/* --- afterwards ------------------------------------------------------------------------------------------------- */

/* Lines of the daemon's log that say a cycle failed or was not recorded. */
static size_t count_failures_in_log(void)
{
    static const char *const signs[] = {"no forecast at this cycle", "nothing is being recorded"};
    size_t count = 0, size = 0;
    char *line = NULL;
    FILE *log = fopen(DRIVEN_DAEMON_LOG, "r");
    if (log == NULL)
        return 0;
    while (getline(&line, &size, log) >= 0)
        for (size_t i = 0; i < sizeof signs / sizeof signs[0]; i++)
            if (strstr(line, signs[i]) != NULL) {
                fprintf(stderr, "play: " DRIVEN_DAEMON_LOG ": %s", line);
                count++;
            }
    free(line);
    fclose(log);
    return count;
}

static bool close_night(struct play *play, bool was_played)
{
    double took_ms = 0.0;
    bool ended = driven_daemon_end(&play->daemon, &took_ms);
    struct gauge_page_count page = gauge_page_counted(play->page);
    printf("\n%zu steps of the world; %zu messages told; %zu drop files; the gauge's page gave %zu replies, %zu "
           "times 'unchanged',\n"
           "and was out of reach %zu times\n",
           play->steps, play->told.message_count, play->files, page.whole, page.unchanged, page.cut_off);
    printf("the daemon ended %.0f ms after SIGTERM%s\n", took_ms,
           ended ? "" : ", and not by itself with exit code 0");
    size_t failures = count_failures_in_log();
    if (failures > 0)
        fprintf(stderr, "play: %zu cycles failed or were not recorded\n", failures);
    if (play->told.message_count == 0)
        fputs("play: nothing was told\n", stderr);
    return was_played && ended && failures == 0 && play->refused == 0 && play->told.message_count > 0 &&
           play->told.unreadable_count == 0;
}

static bool show_status(const struct play *play)
{
    static char command[] = "status", config[] = "--config", config_file[] = DRIVEN_DAEMON_CONFIG;
    char *arguments[] = {command, config, config_file, NULL};
    puts("\nforewater status:");
    int exit_code = driven_daemon_command(&play->daemon, arguments);
    if (exit_code != 0)
        fprintf(stderr, "play: forewater status ended with exit code %d\n", exit_code);
    return exit_code == 0;
}

int main(int argument_count, char *arguments[])
{
    struct play *play = calloc(1, sizeof *play);
    if (play == NULL)
        return EX_OSERR;
    signal(SIGPIPE, SIG_IGN);
    int exit_code = read_options(argument_count, arguments, play);
    if (exit_code == 0) {
        exit_code = EXIT_FAILURE;
        if (set_stage(play)) {
            bool was_played = play_night(play);
            bool is_well = close_night(play, was_played);
            is_well &= told_print_table(&play->told, &play->crossings, play->night);
            is_well &= show_status(play);
            exit_code = is_well ? EXIT_SUCCESS : EXIT_FAILURE;
        }
    }
    gauge_page_close(play->page);
    night_script_clear(&play->script);
    free(play);
    return exit_code;
}
