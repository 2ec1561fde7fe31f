/* SPDX-License-Identifier: MIT */
/*
 * The executable as the shell sees it: a work folder of its own, files in it, commands that end within a deadline,
 * and one daemon, in the world's own time or driven. Everything a test was given belongs to the folder and goes
 * with it; a daemon that still runs then is killed. FOREWATER_KEEP=1 leaves the folder for a look.
 */
#ifndef FOREWATER_TESTS_SCENARIOS_PROCESS_H
#define FOREWATER_TESTS_SCENARIOS_PROCESS_H

#include <errno.h>
#include <fcntl.h>
#include <ftw.h>
#include <poll.h>
#include <setjmp.h>
#include <signal.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/prctl.h>
#include <sys/socket.h>
#include <sys/stat.h>
#include <sys/un.h>
#include <sys/wait.h>
#include <time.h>
#include <unistd.h>

#include <cmocka.h>

#include "daemon/when.h"

enum {
    WORK_PATH_SIZE = 512,
    WORK_ARGUMENTS_MAX = 48,
    /* far beyond what anything takes on an idle machine: sanitizers on a busy one need some of it */
    WORK_DEADLINE_MS = 30000,
    WORK_LOOK_EVERY_MS = 3
};

struct work {
    char folder[64];
    char executable[WORK_PATH_SIZE];
    pid_t daemon; /* 0: none */
    int driver;   /* -1: not driven */
    unsigned run_count;
    char daemon_log[32]; /* where the newest daemon's stderr goes */
    char **kept;
    size_t kept_count, kept_capacity;
};

struct ending { /* how a command ended; texts belong to the work folder */
    int code;   /* exit code, or minus the signal */
    const char *out, *err;
    int64_t took_ms;
};

/* --- time ------------------------------------------------------------------------------------------------------- */

static inline int64_t work_clock_ms(void)
{
    struct timespec now;
    clock_gettime(CLOCK_MONOTONIC, &now);
    return (int64_t)now.tv_sec * 1000 + now.tv_nsec / 1000000;
}

static inline void work_rest(void)
{
    struct timespec pause = {.tv_nsec = WORK_LOOK_EVERY_MS * 1000000L};
    nanosleep(&pause, NULL);
}

/* while (!it_has_come && patience_left(until_ms)) ; */
static inline bool patience_left(int64_t until_ms)
{
    work_rest();
    return work_clock_ms() < until_ms;
}

/* --- files ------------------------------------------------------------------------------------------------------ */

static inline char *work_keep(struct work *work, char *text)
{
    assert_non_null(text);
    if (work->kept_count == work->kept_capacity) {
        work->kept_capacity = 2 * work->kept_capacity + 64;
        work->kept = realloc(work->kept, work->kept_capacity * sizeof *work->kept);
        assert_non_null(work->kept);
    }
    return work->kept[work->kept_count++] = text;
}

__attribute__((format(printf, 2, 3))) static inline char *work_print(struct work *work, const char *format, ...)
{
    char *text = NULL;
    va_list arguments;
    va_start(arguments, format);
    int length = vasprintf(&text, format, arguments);
    va_end(arguments);
    assert_true(length >= 0);
    return work_keep(work, text);
}

static inline char *work_path(struct work *work, const char *name)
{
    return work_print(work, "%s/%s", work->folder, name);
}

static inline bool work_has(struct work *work, const char *name)
{
    struct stat about;
    return lstat(work_path(work, name), &about) == 0;
}

static inline void work_write_bytes(struct work *work, const char *name, const void *bytes, size_t length)
{
    FILE *file = fopen(work_path(work, name), "wbe");
    assert_non_null(file);
    assert_int_equal(fwrite(bytes, 1, length, file), length);
    assert_int_equal(fclose(file), 0);
}

static inline void work_write(struct work *work, const char *name, const char *text)
{
    work_write_bytes(work, name, text, strlen(text));
}

static inline void work_append(struct work *work, const char *name, const char *text)
{
    FILE *file = fopen(work_path(work, name), "abe");
    assert_non_null(file);
    assert_int_equal(fputs(text, file) >= 0, 1);
    assert_int_equal(fclose(file), 0);
}

/* The whole file, closed by a zero; "" when there is none. */
static inline char *work_read_bytes(struct work *work, const char *name, size_t *length_out)
{
    size_t length = 0;
    char *bytes = NULL;
    FILE *file = fopen(work_path(work, name), "rbe");
    if (file != NULL) {
        assert_int_equal(fseek(file, 0, SEEK_END), 0);
        long size = ftell(file);
        rewind(file);
        bytes = calloc(1, (size_t)size + 1);
        assert_non_null(bytes);
        length = fread(bytes, 1, (size_t)size, file);
        fclose(file);
    } else {
        bytes = calloc(1, 1);
    }
    if (length_out != NULL)
        *length_out = length;
    return work_keep(work, bytes);
}

static inline char *work_read(struct work *work, const char *name)
{
    return work_read_bytes(work, name, NULL);
}

static inline void work_make_folder(struct work *work, const char *name)
{
    assert_int_equal(mkdir(work_path(work, name), 0755), 0);
}

static inline void work_remove(struct work *work, const char *name)
{
    assert_int_equal(unlink(work_path(work, name)), 0);
}

static inline void work_rename(struct work *work, const char *from, const char *to)
{
    assert_int_equal(rename(work_path(work, from), work_path(work, to)), 0);
}

static inline int work_remove_one(const char *path, const struct stat *about, int kind, struct FTW *place)
{
    (void)about, (void)kind, (void)place;
    return remove(path);
}

/* --- processes -------------------------------------------------------------------------------------------------- */

/* In the child; never returns. */
static inline void work_become(const struct work *work, const char *program, char *const arguments[], const char *out,
                               const char *err, pid_t parent)
{
    prctl(PR_SET_PDEATHSIG, SIGKILL);
    int null = open("/dev/null", O_RDONLY | O_CLOEXEC);
    int out_file = -1;
    int err_file = -1;
    if (chdir(work->folder) == 0) {
        out_file = open(out, O_WRONLY | O_CREAT | O_APPEND | O_CLOEXEC, 0644);
        err_file = open(err, O_WRONLY | O_CREAT | O_APPEND | O_CLOEXEC, 0644);
    }
    if (null < 0 || out_file < 0 || err_file < 0 || dup2(null, 0) < 0 || dup2(out_file, 1) < 0 ||
        dup2(err_file, 2) < 0 || getppid() != parent)
        _exit(126);
    execv(program, arguments);
    fprintf(stderr, "%s: %s\n", program, strerror(errno));
    _exit(126);
}

static inline pid_t work_spawn(const struct work *work, char *const arguments[], const char *out, const char *err)
{
    fflush(NULL);
    pid_t parent = getpid();
    pid_t process = fork();
    assert_true(process >= 0);
    if (process == 0)
        work_become(work, work->executable, arguments, out, err, parent);
    return process;
}

static inline int work_code_of(int status)
{
    return WIFEXITED(status) ? WEXITSTATUS(status) : -WTERMSIG(status);
}

/* Waits for a child until the deadline; one that does not end is killed and the test fails. */
static inline int work_await(pid_t process, int64_t deadline_ms)
{
    int status = 0;
    int64_t until_ms = work_clock_ms() + deadline_ms;
    pid_t ended;
    while ((ended = waitpid(process, &status, WNOHANG)) == 0 && patience_left(until_ms))
        ;
    if (ended == 0) {
        kill(process, SIGKILL);
        waitpid(process, &status, 0);
        fail_msg("process %d did not end within %lld ms", (int)process, (long long)deadline_ms);
    }
    return work_code_of(status);
}

static inline void work_gather(struct work *work, char *arguments[WORK_ARGUMENTS_MAX], size_t *count, va_list given)
{
    const char *argument;
    while ((argument = va_arg(given, const char *)) != NULL) {
        assert_true(*count + 1 < WORK_ARGUMENTS_MAX);
        arguments[(*count)++] = work_print(work, "%s", argument);
    }
    arguments[*count] = NULL;
}

/* A command under way: its number names where its output goes. */
struct errand {
    pid_t process;
    unsigned number;
    int64_t started_ms;
};

static inline struct errand work_send_off(struct work *work, char *const arguments[])
{
    struct errand errand = {.number = ++work->run_count, .started_ms = work_clock_ms()};
    errand.process = work_spawn(work, arguments, work_print(work, "run-%u.out", errand.number),
                                work_print(work, "run-%u.err", errand.number));
    return errand;
}

static inline struct ending work_fetch(struct work *work, struct errand errand)
{
    struct ending ending = {.code = work_await(errand.process, WORK_DEADLINE_MS)};
    ending.took_ms = work_clock_ms() - errand.started_ms;
    ending.out = work_read(work, work_print(work, "run-%u.out", errand.number));
    ending.err = work_read(work, work_print(work, "run-%u.err", errand.number));
    return ending;
}

/* forewater with exactly these words, closed by NULL. */
__attribute__((sentinel)) static inline struct ending work_run_bare(struct work *work, ...)
{
    char *arguments[WORK_ARGUMENTS_MAX] = {work->executable};
    size_t count = 1;
    va_list given;
    va_start(given, work);
    work_gather(work, arguments, &count, given);
    va_end(given);
    return work_fetch(work, work_send_off(work, arguments));
}

/* forewater COMMAND --config forewater.json and these words, closed by NULL. */
__attribute__((sentinel)) static inline struct ending work_run(struct work *work, const char *command, ...)
{
    char *arguments[WORK_ARGUMENTS_MAX] = {work->executable};
    size_t count = 1;
    arguments[count++] = work_print(work, "%s", command);
    arguments[count++] = work_print(work, "--config");
    arguments[count++] = work_print(work, "forewater.json");
    va_list given;
    va_start(given, command);
    work_gather(work, arguments, &count, given);
    va_end(given);
    return work_fetch(work, work_send_off(work, arguments));
}

/* The same, not waited for. */
__attribute__((sentinel)) static inline struct errand work_begin(struct work *work, const char *command, ...)
{
    char *arguments[WORK_ARGUMENTS_MAX] = {work->executable};
    size_t count = 1;
    arguments[count++] = work_print(work, "%s", command);
    arguments[count++] = work_print(work, "--config");
    arguments[count++] = work_print(work, "forewater.json");
    va_list given;
    va_start(given, command);
    work_gather(work, arguments, &count, given);
    va_end(given);
    return work_send_off(work, arguments);
}

/* --- the daemon ------------------------------------------------------------------------------------------------- */

static inline const char *daemon_log(struct work *work)
{
    return work_read(work, work->daemon_log);
}

static inline void daemon_fail(struct work *work, const char *what)
{
    const char *log = daemon_log(work);
    size_t length = strlen(log);
    print_error("the end of %s:\n%s\n", work->daemon_log, length > 3000 ? log + length - 3000 : log);
    fail_msg("%s", what);
}

static inline void daemon_await_log(struct work *work, const char *text)
{
    int64_t until_ms = work_clock_ms() + WORK_DEADLINE_MS;
    bool has_come;
    while (!(has_come = strstr(daemon_log(work), text) != NULL) && patience_left(until_ms))
        ;
    if (!has_come)
        daemon_fail(work, work_print(work, "the daemon never said '%s'", text));
}

/* It watches: what comes from now on is seen. Further words of `run`, closed by NULL. */
__attribute__((sentinel)) static inline void daemon_start(struct work *work, ...)
{
    char *arguments[WORK_ARGUMENTS_MAX] = {work->executable, work_print(work, "run"), work_print(work, "--config"),
                                           work_print(work, "forewater.json")};
    size_t count = 4;
    va_list given;
    va_start(given, work);
    work_gather(work, arguments, &count, given);
    va_end(given);
    assert_int_equal(work->daemon, 0);
    snprintf(work->daemon_log, sizeof work->daemon_log, "daemon-%u.log", ++work->run_count);
    work->daemon = work_spawn(work, arguments, work->daemon_log, work->daemon_log);
    daemon_await_log(work, " watches ");
}

static inline void daemon_connect(struct work *work)
{
    struct sockaddr_un address = {.sun_family = AF_UNIX};
    snprintf(address.sun_path, sizeof address.sun_path, "%s/drive.sock", work->folder);
    int64_t until_ms = work_clock_ms() + WORK_DEADLINE_MS;
    do {
        work->driver = socket(AF_UNIX, SOCK_STREAM | SOCK_CLOEXEC, 0);
        assert_true(work->driver >= 0);
        if (connect(work->driver, (struct sockaddr *)&address, sizeof address) == 0)
            return;
        close(work->driver);
        work->driver = -1;
    } while (patience_left(until_ms));
    daemon_fail(work, "the daemon's drive socket cannot be reached");
}

/* A world that stands at this moment until it is moved. */
static inline void daemon_start_driven(struct work *work, int64_t world_start_utc_s)
{
    char start[WHEN_TEXT_SIZE];
    daemon_start(work, "--drive", "drive.sock", "--world-start", when_rfc3339_utc(world_start_utc_s, start), NULL);
    daemon_connect(work);
}

static inline void daemon_send(struct work *work, const char *line)
{
    size_t length = strlen(line);
    if (send(work->driver, line, length, MSG_NOSIGNAL) != (ssize_t)length)
        daemon_fail(work, "the daemon does not listen to its driver");
}

/* One line of its answer. */
static inline const char *daemon_receive(struct work *work)
{
    char line[512];
    size_t length = 0;
    int64_t until_ms = work_clock_ms() + WORK_DEADLINE_MS;
    for (int64_t left_ms; (left_ms = until_ms - work_clock_ms()) > 0;) {
        struct pollfd waiting = {.fd = work->driver, .events = POLLIN};
        if (poll(&waiting, 1, (int)left_ms) <= 0)
            continue;
        if (recv(work->driver, &line[length], 1, 0) != 1)
            daemon_fail(work, "the daemon closed its driver's connection");
        if (line[length] == '\n') {
            line[length] = '\0';
            return work_print(work, "%s", line);
        }
        if (++length == sizeof line)
            break;
    }
    daemon_fail(work, "the daemon does not answer its driver");
    return "";
}

/* Moves the world; returns when the daemon has nothing pending at that moment. */
static inline void daemon_advance(struct work *work, int64_t utc_s)
{
    char time[WHEN_TEXT_SIZE];
    when_rfc3339_utc(utc_s, time);
    daemon_send(work, work_print(work, "advance %s\n", time));
    assert_string_equal(daemon_receive(work), work_print(work, "at %s", time));
}

/* The same without waiting: for a moment at which something stays pending. */
static inline void daemon_push(struct work *work, int64_t utc_s)
{
    char time[WHEN_TEXT_SIZE];
    daemon_send(work, work_print(work, "advance %s\n", when_rfc3339_utc(utc_s, time)));
}

static inline void daemon_forget(struct work *work)
{
    work->daemon = 0;
    if (work->driver >= 0)
        close(work->driver);
    work->driver = -1;
}

/* Sends the signal and returns how it ended; *took_ms_out may be NULL. */
static inline int daemon_end(struct work *work, int signal, int64_t *took_ms_out)
{
    int64_t from_ms = work_clock_ms();
    pid_t process = work->daemon;
    assert_true(process > 0);
    assert_int_equal(kill(process, signal), 0);
    daemon_forget(work);
    int code = work_await(process, WORK_DEADLINE_MS);
    if (took_ms_out != NULL)
        *took_ms_out = work_clock_ms() - from_ms;
    return code;
}

/* --- the folder ------------------------------------------------------------------------------------------------- */

static inline int work_open(void **state)
{
    struct work *work = calloc(1, sizeof *work);
    if (work == NULL)
        return -1;
    work->driver = -1;
    snprintf(work->folder, sizeof work->folder, "/tmp/forewater-run-XXXXXX");
    snprintf(work->executable, sizeof work->executable, "%s", FW_EXECUTABLE);
    if (mkdtemp(work->folder) == NULL) {
        free(work);
        return -1;
    }
    *state = work;
    return 0;
}

static inline int work_close(void **state)
{
    struct work *work = *state;
    if (work->daemon > 0) {
        kill(work->daemon, SIGKILL);
        waitpid(work->daemon, NULL, 0);
        daemon_forget(work);
    }
    if (getenv("FOREWATER_KEEP") == NULL)
        nftw(work->folder, work_remove_one, 16, FTW_DEPTH | FTW_PHYS);
    else
        print_message("kept: %s\n", work->folder);
    for (size_t index = 0; index < work->kept_count; index++)
        free(work->kept[index]);
    free(work->kept);
    free(work);
    return 0;
}

/* A test with a work folder of its own. */
#define WORK_TEST(name) cmocka_unit_test_setup_teardown(name, work_open, work_close)

#endif
