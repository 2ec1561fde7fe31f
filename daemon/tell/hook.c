/* SPDX-License-Identifier: MIT */
#include "daemon/tell/hook.h"

#include <errno.h>
#include <fcntl.h>
#include <poll.h>
#include <signal.h>
#include <spawn.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/mman.h>
#include <sys/pidfd.h>
#include <sys/wait.h>
#include <unistd.h>

#include "daemon/clock.h"

enum {
    READ_SIZE = 4096,      /* at once, so that a flood of short lines cannot hold the loop */
    DROP_SIZE = 65536,     /* at once, when nothing of it is kept */
    DRAIN_READS_MAX = 256, /* after its end: a process that left the group may write for ever */
    AFTER_KILL_MS = 2000,
    LINE_SIZE = 512,
    LAST_LINE_SIZE = 160
};

struct hook {
    char name[160];
    pid_t pid; /* also its process group */
    int pidfd;
    int output; /* reading end */
    sd_event_source *exit_source, *output_source, *timer;
    struct journal *journal;
    struct hook_limits limits;
    size_t output_taken, output_dropped;
    char line[LINE_SIZE];
    size_t line_length;
    char last_line[LAST_LINE_SIZE];
    bool was_told_to_end, is_over_time, was_killed;
    hook_ended *ended;
    void *context;
};

struct hook_limits hook_limits_usual(void)
{
    return (struct hook_limits){.run_ms = 30000, .grace_ms = 5000, .output_size = 65536};
}

static void hook_destroy(struct hook *hook)
{
    if (hook == NULL)
        return;
    sd_event_source_disable_unref(hook->exit_source);
    sd_event_source_disable_unref(hook->output_source);
    sd_event_source_disable_unref(hook->timer);
    if (hook->pidfd >= 0)
        close(hook->pidfd);
    if (hook->output >= 0)
        close(hook->output);
    free(hook);
}

/* --- what it writes --- */

static void say_line(struct hook *hook)
{
    if (hook->line_length == 0)
        return;
    journal_say(hook->journal, JOURNAL_INFO, "%s: %.*s", hook->name, (int)hook->line_length, hook->line);
    size_t length = hook->line_length < LAST_LINE_SIZE - 1 ? hook->line_length : LAST_LINE_SIZE - 1;
    for (size_t i = 0; i < length; i++) {
        char byte = hook->line[i];
        hook->last_line[i] = byte >= ' ' && byte <= '~' ? byte : '?';
    }
    hook->last_line[length] = '\0';
    hook->line_length = 0;
}

static void take_output(struct hook *hook, const char *bytes, size_t length)
{
    size_t room = hook->limits.output_size - hook->output_taken;
    size_t taken = length < room ? length : room;
    hook->output_taken += taken;
    hook->output_dropped += length - taken;
    for (size_t i = 0; i < taken; i++) {
        if (bytes[i] == '\n' || hook->line_length == sizeof hook->line)
            say_line(hook);
        if (bytes[i] != '\n')
            hook->line[hook->line_length++] = bytes[i];
    }
}

/* One read. False: nothing more for now, or the end. */
static bool read_output(struct hook *hook)
{
    char bytes[DROP_SIZE];
    size_t wanted = hook->output_taken < hook->limits.output_size ? READ_SIZE : DROP_SIZE;
    ssize_t length = read(hook->output, bytes, wanted);
    if (length > 0) {
        take_output(hook, bytes, (size_t)length);
        return true;
    }
    if (length < 0 && (errno == EAGAIN || errno == EINTR))
        return false;
    hook->output_source = sd_event_source_disable_unref(hook->output_source); /* the end, or beyond help */
    return false;
}

static int on_output(sd_event_source *source, int file, uint32_t events, void *context)
{
    (void)source, (void)file, (void)events;
    read_output(context);
    return 0;
}

/* --- how it ends --- */

static void describe_end(const struct hook *hook, const siginfo_t *info, struct hook_end *end_out)
{
    char how[120];
    if (info->si_code == CLD_EXITED)
        snprintf(how, sizeof how, "exit %d", info->si_status);
    else if (info->si_code == CLD_KILLED || info->si_code == CLD_DUMPED)
        snprintf(how, sizeof how, "ended by signal %d (%s)", info->si_status, sigdescr_np(info->si_status));
    else
        snprintf(how, sizeof how, "its end was not seen");
    char late[80] = "";
    if (hook->is_over_time)
        snprintf(late, sizeof late, "no end within %lld ms, TERM%s: ", (long long)hook->limits.run_ms,
                 hook->was_killed ? " and then KILL" : "");
    else if (hook->was_told_to_end)
        snprintf(late, sizeof late, "told to end%s: ", hook->was_killed ? ", then killed" : "");
    snprintf(end_out->note, sizeof end_out->note, "%s%s%s%s", late, how, hook->last_line[0] != '\0' ? ": " : "",
             hook->last_line);
    end_out->is_passed_on = info->si_code == CLD_EXITED && info->si_status == 0;
    end_out->was_told_to_end = hook->was_told_to_end;
}

/*
 * The leader has ended (or is beyond KILL) and is not yet reaped, so that its process group still bears its number.
 */
static void finish(struct hook *hook)
{
    kill(-hook->pid, SIGKILL);
    siginfo_t info = {0};
    while (waitid(P_PIDFD, (id_t)hook->pidfd, &info, WEXITED | WNOHANG) != 0 && errno == EINTR)
        ;
    for (int reads = 0; reads < DRAIN_READS_MAX && read_output(hook); reads++)
        ;
    say_line(hook);
    if (hook->output_dropped > 0)
        journal_say(hook->journal, JOURNAL_WARNING, "%s: wrote more than %zu bytes; the %zu after that are dropped",
                    hook->name, hook->limits.output_size, hook->output_dropped);
    struct hook_end end = {0};
    describe_end(hook, &info, &end);
    hook_ended *ended = hook->ended;
    void *context = hook->context;
    hook_destroy(hook);
    ended(context, &end);
}

static int on_exit_seen(sd_event_source *source, int file, uint32_t events, void *context)
{
    (void)source, (void)file, (void)events;
    finish(context);
    return 0;
}

static void kill_group(struct hook *hook)
{
    hook->was_killed = true;
    kill(-hook->pid, SIGKILL);
}

static void ask_group(struct hook *hook)
{
    kill(-hook->pid, SIGTERM);
    kill(-hook->pid, SIGCONT); /* a stopped process would sleep through its TERM */
}

static uint64_t microseconds(int64_t ms)
{
    return ms > 0 ? (uint64_t)ms * 1000 : 0;
}

static int on_timer(sd_event_source *source, uint64_t usec, void *context)
{
    (void)usec;
    struct hook *hook = context;
    if (hook->is_over_time || hook->was_told_to_end) {
        kill_group(hook);
        return 0;
    }
    hook->is_over_time = true;
    ask_group(hook);
    sd_event_source_set_time_relative(source, microseconds(hook->limits.grace_ms));
    sd_event_source_set_enabled(source, SD_EVENT_ONESHOT);
    return 0;
}

void hook_tell_to_end(struct hook *hook)
{
    if (hook->was_told_to_end || hook->is_over_time)
        return;
    hook->was_told_to_end = true;
    ask_group(hook);
    sd_event_source_set_time_relative(hook->timer, microseconds(hook->limits.grace_ms));
    sd_event_source_set_enabled(hook->timer, SD_EVENT_ONESHOT);
}

void hook_wait(struct hook *hook, int64_t deadline_ms)
{
    struct pollfd watched = {.fd = hook->pidfd, .events = POLLIN};
    bool is_last_wait = false; /* KILL may have been sent a moment ago by its own limit: that moment is not enough */
    hook->was_told_to_end = true;
    for (;;) {
        int64_t left_ms = deadline_ms - clock_machine_ms();
        if (left_ms <= 0 && is_last_wait)
            break; /* not even KILL ended it: a device holds it, and we do not wait for that */
        if (left_ms <= 0) {
            kill_group(hook);
            deadline_ms = clock_machine_ms() + AFTER_KILL_MS;
            is_last_wait = true;
            continue;
        }
        if (poll(&watched, 1, left_ms > 1000 ? 1000 : (int)left_ms) > 0)
            break;
    }
    finish(hook);
}

/* --- how it starts --- */

/* Standard descriptors may be closed in us; the child's must not be mixed up with its own. */
static int above_standard(int file)
{
    if (file < 0 || file > STDERR_FILENO)
        return file;
    int moved = fcntl(file, F_DUPFD_CLOEXEC, STDERR_FILENO + 1);
    int fault = errno;
    close(file);
    errno = fault;
    return moved;
}

static int open_input(const char *bytes, size_t length)
{
    int file = above_standard(memfd_create("forewater-message", MFD_CLOEXEC));
    size_t written = 0;
    while (file >= 0 && written < length) {
        ssize_t more = write(file, bytes + written, length - written);
        if (more > 0) {
            written += (size_t)more;
        } else if (errno != EINTR) {
            close(file);
            return -1;
        }
    }
    if (file >= 0)
        lseek(file, 0, SEEK_SET);
    return file;
}

static int spawn(const struct hook_order *order, int input, int output, pid_t *pid_out)
{
    posix_spawnattr_t attributes;
    posix_spawn_file_actions_t files;
    sigset_t all;
    sigset_t none;
    sigfillset(&all);
    sigemptyset(&none);
    int fault = posix_spawnattr_init(&attributes);
    if (fault != 0)
        return fault;
    fault = posix_spawn_file_actions_init(&files);
    if (fault != 0) {
        posix_spawnattr_destroy(&attributes);
        return fault;
    }
    posix_spawnattr_setflags(&attributes, POSIX_SPAWN_SETPGROUP | POSIX_SPAWN_SETSIGDEF | POSIX_SPAWN_SETSIGMASK);
    posix_spawnattr_setpgroup(&attributes, 0);
    posix_spawnattr_setsigdefault(&attributes, &all);
    posix_spawnattr_setsigmask(&attributes, &none);
    if ((fault = posix_spawn_file_actions_adddup2(&files, input, STDIN_FILENO)) == 0 &&
        (fault = posix_spawn_file_actions_adddup2(&files, output, STDOUT_FILENO)) == 0 &&
        (fault = posix_spawn_file_actions_adddup2(&files, output, STDERR_FILENO)) == 0 &&
        (fault = posix_spawn_file_actions_addclosefrom_np(&files, STDERR_FILENO + 1)) == 0) {
        /* posix_spawn takes arrays of pointers to char for historical reasons and changes nothing in them */
        char **argv;
        char **environment;
        memcpy(&argv, &order->argv, sizeof argv);
        memcpy(&environment, &order->environment, sizeof environment);
        fault = posix_spawn(pid_out, order->argv[0], &files, &attributes, argv, environment);
    }
    posix_spawn_file_actions_destroy(&files);
    posix_spawnattr_destroy(&attributes);
    return fault;
}

static int watch(struct hook *hook, sd_event *event)
{
    int result = sd_event_add_io(event, &hook->exit_source, hook->pidfd, EPOLLIN, on_exit_seen, hook);
    if (result >= 0)
        result = sd_event_add_io(event, &hook->output_source, hook->output, EPOLLIN, on_output, hook);
    if (result >= 0)
        result = sd_event_add_time_relative(event, &hook->timer, CLOCK_BOOTTIME, microseconds(hook->limits.run_ms),
                                            1000, on_timer, hook);
    return result;
}

/* A child that cannot be watched is not let run. */
static void put_down(pid_t pid)
{
    kill(-pid, SIGKILL);
    while (waitpid(pid, NULL, 0) < 0 && errno == EINTR)
        ;
}

enum fw_status hook_start(sd_event *event, struct journal *journal, const struct hook_order *order,
                          const struct hook_limits *limits, hook_ended *ended, void *context, struct hook **hook_out,
                          struct fw_error *error)
{
    enum fw_status status = FW_OK;
    int input = -1;
    int ends[2] = {-1, -1};
    struct hook *hook = calloc(1, sizeof *hook);
    if (hook == NULL)
        return fw_error_set(error, FW_NO_MEMORY, "%s: no memory to start it", order->name);
    *hook = (struct hook){
        .pidfd = -1, .output = -1, .journal = journal, .limits = *limits, .ended = ended, .context = context};
    snprintf(hook->name, sizeof hook->name, "%s", order->name);

    input = open_input(order->input, order->input_length);
    if (input < 0 || pipe2(ends, O_CLOEXEC) != 0) {
        status = fw_error_set(error, FW_IO, "%s: no descriptor to start it: %s", order->name, strerror(errno));
        goto cleanup;
    }
    hook->output = above_standard(ends[0]);
    ends[1] = above_standard(ends[1]);
    if (hook->output < 0 || ends[1] < 0 || fcntl(hook->output, F_SETFL, O_NONBLOCK) != 0) {
        status = fw_error_set(error, FW_IO, "%s: no descriptor to start it: %s", order->name, strerror(errno));
        goto cleanup;
    }
    int fault = spawn(order, input, ends[1], &hook->pid);
    if (fault != 0) {
        bool is_the_system = fault == EAGAIN || fault == ENOMEM || fault == EMFILE || fault == ENFILE;
        status = fw_error_set(error, is_the_system ? FW_IO : FW_UNAVAILABLE, "%s: cannot start %s: %s", order->name,
                              order->argv[0], strerror(fault));
        goto cleanup;
    }
    hook->pidfd = pidfd_open(hook->pid, 0);
    int result = hook->pidfd < 0 ? -errno : watch(hook, event);
    if (result < 0) {
        put_down(hook->pid);
        status = fw_error_set(error, FW_IO, "%s: cannot watch it: %s", order->name, strerror(-result));
        goto cleanup;
    }
    *hook_out = hook;
    hook = NULL;
cleanup:
    if (input >= 0)
        close(input);
    if (ends[1] >= 0)
        close(ends[1]);
    hook_destroy(hook);
    return status;
}
