/* SPDX-License-Identifier: MIT */
/*
 * From a file renamed into the drop folder to the first instruction of the hook: median and worst over many drops, through the running daemon,
 * beside the bare cost of starting that same hook, measured in turn in the same run. Everything on one core.
 *
 *     ninja -C build/release forewater bench_drop_to_hook && build/release/tests/bench_drop_to_hook [DROPS]
 *
 * Every drop carries one reading that turns the decision (a trigger holds, and holds no more), so every drop ends in a message.
 */
#include <errno.h>
#include <fcntl.h>
#include <limits.h>
#include <poll.h>
#include <sched.h>
#include <signal.h>
#include <spawn.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/socket.h>
#include <sys/stat.h>
#include <sys/un.h>
#include <sys/wait.h>
#include <time.h>
#include <unistd.h>

extern char **environ;

enum { DROPS_MOST = 400, DROPS_DEFAULT = 100, PATIENCE_MS = 10000, PATH_SIZE = 256 };

static double now_ms(void)
{
    struct timespec now;
    clock_gettime(CLOCK_MONOTONIC, &now);
    return (double)now.tv_sec * 1e3 + (double)now.tv_nsec / 1e6;
}

static void die(const char *what)
{
    fprintf(stderr, "bench_drop_to_hook: %s: %s\n", what, strerror(errno));
    exit(EXIT_FAILURE);
}

static struct sockaddr_un address_of(const char *path)
{
    struct sockaddr_un address = {.sun_family = AF_UNIX};
    snprintf(address.sun_path, sizeof address.sun_path, "%s", path);
    return address;
}

/* The hook: says when it began, and ends. */
static int be_the_hook(const char *path)
{
    double began_ms = now_ms();
    struct sockaddr_un address = address_of(path);
    int out = socket(AF_UNIX, SOCK_DGRAM | SOCK_CLOEXEC, 0);
    ssize_t sent = sendto(out, &began_ms, sizeof began_ms, 0, (struct sockaddr *)&address, sizeof address);
    return sent == sizeof began_ms ? EXIT_SUCCESS : EXIT_FAILURE;
}

struct bench {
    char folder[PATH_SIZE], socket_path[PATH_SIZE + 16], self[PATH_MAX];
    int answers;
    pid_t daemon;
};

static void write_config(const struct bench *bench)
{
    char path[PATH_SIZE + 32];
    snprintf(path, sizeof path, "%s/bench.json", bench->folder);
    FILE *config = fopen(path, "we");
    if (config == NULL)
        die(path);
    fprintf(config,
            "{ \"district\": { \"name\": \"Vennmark\", \"zone\": \"+01:00\", \"datum\": \"VD-71\", \"night\": "
            "[\"20:00\", \"06:00\"] },\n"
            "  \"store\": { \"file\": \"history.db\" },\n"
            "  \"gauges\": [ { \"id\": \"orlin-scar\", \"name\": \"Orlin Scar\", \"measures\": \"stage\", "
            "\"zero_m\": 126.40,\n"
            "    \"rating\": { \"segments\": [ { \"c\": 11.8, \"h0_m\": 0.42, \"b\": 1.72 } ], \"highest_gauged_m\": "
            "2.38 },\n"
            "    \"feeds\": [ { \"kind\": \"folder\", \"path\": \"drop\", \"time\": \"time\", \"value\": \"stage_m\" "
            "} ],\n"
            "    \"expect_every_min\": 15, \"delivery_min\": 1, \"blind_after_min\": 1440, "
            "\"blind_after_rising_min\": 1440,\n"
            "    \"quality\": { \"lowest_m\": 0.0, \"highest_m\": 9.0, \"fastest_rise_m_h\": 200, "
            "\"fastest_fall_m_h\": 200 } } ],\n"
            "  \"sections\": [ { \"id\": \"ildra\", \"shape\": \"trapezoid\", \"bottom_m\": 14, \"side\": 2.0, "
            "\"n\": 0.038 } ],\n"
            "  \"reaches\": [ { \"id\": \"scar-ford\", \"from\": \"orlin-scar\", \"to\": \"tallowick-ford\", "
            "\"length_m\": 9400,\n"
            "    \"slope\": 0.0024, \"section\": \"ildra\" } ],\n"
            "  \"points\": [ { \"id\": \"tallowick-ford\", \"name\": \"Tallowick Ford\", \"invert_m\": 104.20,\n"
            "    \"marks\": [ { \"name\": \"deck awash\", \"depth_m\": 30.0 } ],\n"
            "    \"crew\": { \"day_min\": 40, \"night_min\": 55, \"margin_min\": 15 }, \"step_down_dwell_min\": 0,\n"
            "    \"triggers\": [ { \"gauge\": \"orlin-scar\", \"stage_m\": 2.00, \"rising\": false, \"gives\": "
            "\"SEND\", \"signed\": \"district engineer\" } ] } ],\n"
            "  \"channels\": [ { \"id\": \"page-duty\", \"kind\": \"command\", \"run\": [ \"%s\", \"--hook\", \"%s\" "
            "] } ] }\n",
            bench->self, bench->socket_path);
    fclose(config);
}

static void start_daemon(struct bench *bench)
{
    char config[PATH_SIZE + 32];
    char log[PATH_SIZE + 32];
    snprintf(config, sizeof config, "%s/bench.json", bench->folder);
    snprintf(log, sizeof log, "%s/daemon.log", bench->folder);
    char program[] = FW_EXECUTABLE, run[] = "run", option[] = "--config";
    char *arguments[] = {program, run, option, config, NULL};
    posix_spawn_file_actions_t actions;
    posix_spawn_file_actions_init(&actions);
    posix_spawn_file_actions_addopen(&actions, STDERR_FILENO, log, O_WRONLY | O_CREAT | O_TRUNC, 0600);
    if (posix_spawn(&bench->daemon, program, &actions, NULL, arguments, environ) != 0)
        die(program);
    posix_spawn_file_actions_destroy(&actions);
}

/* When the hook began; negative: nothing came. */
static double wait_for_hook(const struct bench *bench, int patience_ms)
{
    double began_ms = -1.0;
    struct pollfd ready = {.fd = bench->answers, .events = POLLIN};
    if (poll(&ready, 1, patience_ms) == 1 && read(bench->answers, &began_ms, sizeof began_ms) != sizeof began_ms)
        began_ms = -1.0;
    return began_ms;
}

static double drop(const struct bench *bench, int index, int count)
{
    char new_name[PATH_SIZE + 64];
    char name[PATH_SIZE + 64];
    char stamp[40];
    time_t observed = time(NULL) - (count - index) * 60;
    struct tm broken;
    snprintf(new_name, sizeof new_name, "%s/drop/.new", bench->folder);
    snprintf(name, sizeof name, "%s/drop/%04d.csv", bench->folder, index);
    strftime(stamp, sizeof stamp, "%Y-%m-%dT%H:%M:%SZ", gmtime_r(&observed, &broken));
    FILE *file = fopen(new_name, "we");
    if (file == NULL)
        die(new_name);
    fprintf(file, "time,stage_m\n%s,%.2f\n", stamp, index % 2 == 0 ? 2.51 : 1.07);
    fclose(file);
    double dropped_ms = now_ms();
    if (rename(new_name, name) != 0)
        die(name);
    double began_ms = wait_for_hook(bench, PATIENCE_MS);
    if (began_ms < 0.0) {
        fprintf(stderr, "bench_drop_to_hook: drop %d told nobody within %d s; see %s/daemon.log\n", index,
                PATIENCE_MS / 1000, bench->folder);
        exit(EXIT_FAILURE);
    }
    return began_ms - dropped_ms;
}

static double bare_start(struct bench *bench)
{
    char option[] = "--hook";
    char *arguments[] = {bench->self, option, bench->socket_path, NULL};
    pid_t child;
    double spawned_ms = now_ms();
    if (posix_spawn(&child, bench->self, NULL, NULL, arguments, environ) != 0)
        die("posix_spawn");
    double began_ms = wait_for_hook(bench, PATIENCE_MS);
    waitpid(child, NULL, 0);
    return began_ms - spawned_ms;
}

static int compare(const void *left, const void *right)
{
    double a = *(const double *)left;
    double b = *(const double *)right;
    return (a > b) - (a < b);
}

static double print_figures(const char *what, double values[], int count)
{
    qsort(values, (size_t)count, sizeof *values, compare);
    printf("%-28s median %7.2f ms   worst %7.2f ms   (%d)\n", what, values[count / 2], values[count - 1], count);
    return values[count / 2];
}

static void prepare(struct bench *bench, const char *self)
{
    cpu_set_t one;
    CPU_ZERO(&one);
    CPU_SET(0, &one);
    sched_setaffinity(0, sizeof one, &one); /* the daemon and its hooks inherit it */
    snprintf(bench->folder, sizeof bench->folder, "%s", "/tmp/forewater-bench-XXXXXX");
    if (mkdtemp(bench->folder) == NULL || realpath(self, bench->self) == NULL)
        die("a work folder");
    snprintf(bench->socket_path, sizeof bench->socket_path, "%s/hook", bench->folder);
    struct sockaddr_un address = address_of(bench->socket_path);
    bench->answers = socket(AF_UNIX, SOCK_DGRAM | SOCK_CLOEXEC, 0);
    if (bench->answers < 0 || bind(bench->answers, (struct sockaddr *)&address, sizeof address) != 0)
        die(bench->socket_path);
    write_config(bench);
}

int main(int argument_count, char *arguments[])
{
    if (argument_count == 3 && strcmp(arguments[1], "--hook") == 0)
        return be_the_hook(arguments[2]);
    int count = argument_count > 1 ? atoi(arguments[1]) : DROPS_DEFAULT;
    if (count < 2 || count > DROPS_MOST) {
        fprintf(stderr, "usage: bench_drop_to_hook [DROPS], 2 to %d\n", DROPS_MOST);
        return EXIT_FAILURE;
    }
    static double drops_ms[DROPS_MOST];
    static double starts_ms[DROPS_MOST];
    struct bench bench = {.answers = -1};
    prepare(&bench, arguments[0]);
    start_daemon(&bench);
    while (wait_for_hook(&bench, 1500) >= 0.0)
        ; /* what it has to say of a river it knows nothing of */
    for (int index = 0; index < count; index++) {
        drops_ms[index] = drop(&bench, index, count);
        starts_ms[index] = bare_start(&bench);
    }
    kill(bench.daemon, SIGTERM);
    waitpid(bench.daemon, NULL, 0);
    double whole_ms = print_figures("file renamed in to hook", drops_ms, count);
    double bare_ms = print_figures("bare start of the hook", starts_ms, count);
    printf("the whole way costs %.1f bare starts\n", whole_ms / bare_ms);
    return EXIT_SUCCESS;
}
