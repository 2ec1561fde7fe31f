/* SPDX-License-Identifier: MIT */
#include "config/demo/driven_daemon.h"

#include <errno.h>
#include <fcntl.h>
#include <poll.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/prctl.h>
#include <sys/socket.h>
#include <sys/un.h>
#include <sys/wait.h>
#include <time.h>
#include <unistd.h>

#include "config/demo/night_time.h"

static const char socket_path[] = "drive.sock";
static const double connect_limit_ms = 20000.0, answer_limit_ms = 120000.0, end_limit_ms = 10000.0;
enum { LOOK_AGAIN_MS = 5, LOG_TAIL_SIZE = 2000, COMMAND_ARGUMENTS_MAX = 32, ANSWER_SIZE = 512 };

static double machine_ms(void)
{
    struct timespec now;
    clock_gettime(CLOCK_MONOTONIC, &now);
    return 1e3 * (double)now.tv_sec + 1e-6 * (double)now.tv_nsec;
}

static void wait_a_little(void)
{
    struct timespec pause = {.tv_nsec = LOOK_AGAIN_MS * 1000000L};
    nanosleep(&pause, NULL);
}

static void show_log_tail(void)
{
    FILE *log = fopen(DRIVEN_DAEMON_LOG, "r");
    if (log == NULL)
        return;
    char tail[LOG_TAIL_SIZE + 1];
    if (fseek(log, 0, SEEK_END) == 0 && ftell(log) > LOG_TAIL_SIZE)
        fseek(log, -LOG_TAIL_SIZE, SEEK_END);
    else
        rewind(log);
    size_t length = fread(tail, 1, LOG_TAIL_SIZE, log);
    tail[length] = '\0';
    fprintf(stderr, "play: the end of " DRIVEN_DAEMON_LOG ":\n%s\n", tail);
    fclose(log);
}

static bool has_died(struct driven_daemon *daemon)
{
    if (daemon->process == 0)
        return true;
    if (waitpid(daemon->process, &daemon->exit_status, WNOHANG) != daemon->process)
        return false;
    daemon->process = 0;
    if (WIFSIGNALED(daemon->exit_status))
        fprintf(stderr, "play: the daemon died of signal %d\n", WTERMSIG(daemon->exit_status));
    else
        fprintf(stderr, "play: the daemon ended with exit code %d\n", WEXITSTATUS(daemon->exit_status));
    show_log_tail();
    return true;
}

/* After its end of the connection closed: it is given a moment to be seen dead, so that its exit code can be told. */
static void tell_how_it_closed(struct driven_daemon *daemon)
{
    double deadline_ms = machine_ms() + 1000.0;
    while (machine_ms() < deadline_ms) {
        if (has_died(daemon))
            return;
        wait_a_little();
    }
    fputs("play: the daemon closed the connection\n", stderr);
}

/* In the child: never returns. */
static void become_daemon(const char *executable, const char *world_start, pid_t player)
{
    prctl(PR_SET_PDEATHSIG, SIGTERM);
    int log = open(DRIVEN_DAEMON_LOG, O_WRONLY | O_CREAT | O_TRUNC | O_CLOEXEC, 0666);
    if (log < 0 || dup2(log, STDOUT_FILENO) < 0 || dup2(log, STDERR_FILENO) < 0 || getppid() != player)
        _exit(127);
    execl(executable, executable, "run", "--config", DRIVEN_DAEMON_CONFIG, "--drive", socket_path, "--world-start",
          world_start, (char *)NULL);
    fprintf(stderr, "%s: %s\n", executable, strerror(errno));
    _exit(127);
}

static bool connect_to(struct driven_daemon *daemon)
{
    struct sockaddr_un address = {.sun_family = AF_UNIX};
    memcpy(address.sun_path, socket_path, sizeof socket_path);
    double deadline_ms = machine_ms() + connect_limit_ms;
    while (machine_ms() < deadline_ms && !has_died(daemon)) {
        int connection = socket(AF_UNIX, SOCK_STREAM | SOCK_CLOEXEC, 0);
        if (connection >= 0 && connect(connection, (struct sockaddr *)&address, sizeof address) == 0) {
            daemon->connection = connection;
            return true;
        }
        if (connection >= 0)
            close(connection);
        wait_a_little();
    }
    if (daemon->process != 0)
        fprintf(stderr, "play: the daemon opened no %s within %.0f s\n", socket_path, connect_limit_ms / 1e3);
    return false;
}

bool driven_daemon_start(struct driven_daemon *daemon, const char *executable, int64_t world_start_utc_s)
{
    char world_start[NIGHT_TIME_SIZE];
    night_time_rfc3339_utc(world_start_utc_s, world_start);
    *daemon = (struct driven_daemon){.executable = executable, .connection = -1};
    unlink(socket_path);
    fflush(NULL);
    pid_t player = getpid();
    pid_t process = fork();
    if (process < 0) {
        fprintf(stderr, "play: no process for the daemon: %s\n", strerror(errno));
        return false;
    }
    if (process == 0)
        become_daemon(executable, world_start, player);
    daemon->process = process;
    return connect_to(daemon);
}

static bool send_line(const struct driven_daemon *daemon, const char *line, size_t length)
{
    while (length > 0) {
        ssize_t sent = send(daemon->connection, line, length, MSG_NOSIGNAL);
        if (sent < 0 && errno != EINTR)
            return false;
        if (sent > 0) {
            line += sent;
            length -= (size_t)sent;
        }
    }
    return true;
}

/* One line, without its end. */
static bool receive_line(struct driven_daemon *daemon, char answer[ANSWER_SIZE])
{
    size_t length = 0;
    double deadline_ms = machine_ms() + answer_limit_ms;
    while (machine_ms() < deadline_ms) {
        struct pollfd waiting = {.fd = daemon->connection, .events = POLLIN};
        if (poll(&waiting, 1, 200) <= 0) {
            if (has_died(daemon))
                return false;
            continue;
        }
        ssize_t got = recv(daemon->connection, answer + length, 1, 0);
        if (got <= 0) {
            tell_how_it_closed(daemon);
            return false;
        }
        if (answer[length] == '\n' || length + 2 == ANSWER_SIZE) {
            answer[length] = '\0';
            return true;
        }
        length++;
    }
    fprintf(stderr, "play: no answer from the daemon within %.0f s\n", answer_limit_ms / 1e3);
    return false;
}

bool driven_daemon_advance(struct driven_daemon *daemon, int64_t utc_s)
{
    char time[NIGHT_TIME_SIZE], line[64], expected[64], answer[ANSWER_SIZE];
    night_time_rfc3339_utc(utc_s, time);
    int length = snprintf(line, sizeof line, "advance %s\n", time);
    snprintf(expected, sizeof expected, "at %s", time);
    if (!send_line(daemon, line, (size_t)length)) {
        if (!has_died(daemon))
            fprintf(stderr, "play: the daemon cannot be told the time: %s\n", strerror(errno));
        return false;
    }
    if (!receive_line(daemon, answer))
        return false;
    if (strcmp(answer, expected) != 0) {
        fprintf(stderr, "play: at %s the daemon answered '%s'\n", time, answer);
        show_log_tail();
        return false;
    }
    return true;
}

int driven_daemon_command(const struct driven_daemon *daemon, char *const arguments[])
{
    char *argv[COMMAND_ARGUMENTS_MAX] = {(char *)(uintptr_t)daemon->executable};
    size_t count = 1;
    for (; arguments[count - 1] != NULL && count < COMMAND_ARGUMENTS_MAX - 1; count++)
        argv[count] = arguments[count - 1];
    fflush(NULL);
    pid_t process = fork();
    if (process < 0) {
        fprintf(stderr, "play: no process for %s %s: %s\n", daemon->executable, argv[1], strerror(errno));
        return -1;
    }
    if (process == 0) {
        execv(daemon->executable, argv);
        fprintf(stderr, "play: %s: %s\n", daemon->executable, strerror(errno));
        _exit(127);
    }
    int status = 0;
    while (waitpid(process, &status, 0) < 0 && errno == EINTR)
        continue;
    return WIFEXITED(status) ? WEXITSTATUS(status) : -1;
}

bool driven_daemon_end(struct driven_daemon *daemon, double *took_ms_out)
{
    double asked_ms = machine_ms();
    bool ended_by_itself = false;
    if (daemon->process != 0 && kill(daemon->process, SIGTERM) == 0) {
        pid_t ended = 0;
        while ((ended = waitpid(daemon->process, &daemon->exit_status, WNOHANG)) == 0 &&
               machine_ms() < asked_ms + end_limit_ms)
            wait_a_little();
        ended_by_itself =
            ended == daemon->process && WIFEXITED(daemon->exit_status) && WEXITSTATUS(daemon->exit_status) == 0;
        if (ended == 0) {
            kill(daemon->process, SIGKILL);
            waitpid(daemon->process, &daemon->exit_status, 0);
        }
    }
    *took_ms_out = machine_ms() - asked_ms;
    daemon->process = 0;
    if (daemon->connection >= 0)
        close(daemon->connection);
    daemon->connection = -1;
    return ended_by_itself;
}
