/* SPDX-License-Identifier: MIT */
#include "daemon/tell/hook.h"

#include <dirent.h>
#include <errno.h>
#include <fcntl.h>
#include <setjmp.h>
#include <signal.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/resource.h>
#include <sys/stat.h>
#include <sys/wait.h>
#include <unistd.h>

#include <cmocka.h>

#include "daemon/clock.h"

struct bench {
    char folder[64];
    sd_event *event;
    char *said;
    size_t said_length;
    struct journal journal;
    struct hook_limits limits;
    struct hook_end end;
    int end_count;
    size_t descriptors_before;
};

static size_t count_descriptors(void)
{
    size_t count = 0;
    DIR *folder = opendir("/proc/self/fd");
    assert_non_null(folder);
    while (readdir(folder) != NULL)
        count++;
    closedir(folder);
    return count;
}

static int set_up(void **state)
{
    struct bench *bench = calloc(1, sizeof *bench);
    assert_non_null(bench);
    snprintf(bench->folder, sizeof bench->folder, "/tmp/forewater-hook-XXXXXX");
    assert_non_null(mkdtemp(bench->folder));
    assert_true(sd_event_new(&bench->event) >= 0);
    FILE *stream = open_memstream(&bench->said, &bench->said_length);
    assert_non_null(stream);
    bench->journal = journal_open(stream, JOURNAL_DEBUG);
    bench->limits = (struct hook_limits){.run_ms = 20000, .grace_ms = 5000, .output_size = 65536};
    /* the first timer of a loop opens a descriptor that stays */
    sd_event_source *timer = NULL;
    assert_true(sd_event_add_time_relative(bench->event, &timer, CLOCK_BOOTTIME, 1000000000, 0, NULL, NULL) >= 0);
    assert_true(sd_event_run(bench->event, 0) >= 0);
    sd_event_source_disable_unref(timer);
    bench->descriptors_before = count_descriptors();
    *state = bench;
    return 0;
}

/* Nothing may be left behind, whatever the hook did. */
static int tear_down(void **state)
{
    struct bench *bench = *state;
    assert_int_equal(count_descriptors(), bench->descriptors_before);
    assert_int_equal(waitpid(-1, NULL, WNOHANG), -1);
    assert_int_equal(errno, ECHILD);
    sd_event_unref(bench->event);
    fclose(bench->journal.stream);
    free(bench->said);
    char command[128];
    snprintf(command, sizeof command, "rm -r '%s'", bench->folder);
    assert_int_equal(system(command), 0);
    free(bench);
    return 0;
}

static const char *path_of(const struct bench *bench, const char *name, char path[128])
{
    snprintf(path, 128, "%s/%s", bench->folder, name);
    return path;
}

static void write_script(const struct bench *bench, const char *body, mode_t mode, char path[128])
{
    FILE *file = fopen(path_of(bench, "hook", path), "we");
    assert_non_null(file);
    fprintf(file, "#!/bin/sh\n%s\n", body);
    assert_int_equal(fclose(file), 0);
    assert_int_equal(chmod(path, mode), 0);
}

static void read_back(const struct bench *bench, const char *name, char *text_out, size_t size)
{
    char path[128];
    FILE *file = fopen(path_of(bench, name, path), "re");
    assert_non_null(file);
    text_out[fread(text_out, 1, size - 1, file)] = '\0';
    fclose(file);
}

static void take_end(void *context, const struct hook_end *end)
{
    struct bench *bench = context;
    bench->end = *end;
    bench->end_count++;
}

static const char *const environment[] = {"PATH=/usr/sbin:/usr/bin:/sbin:/bin", "FOREWATER_NUMBER=412", NULL};

static struct hook *start(struct bench *bench, const char *path, const char *argument, const char *input)
{
    struct fw_error error = {0};
    const char *argv[] = {path, argument, NULL};
    struct hook_order order = {.name = "hook 'page-duty' #0412",
                               .argv = argv,
                               .environment = environment,
                               .input = input,
                               .input_length = strlen(input)};
    struct hook *hook = NULL;
    enum fw_status status =
        hook_start(bench->event, &bench->journal, &order, &bench->limits, take_end, bench, &hook, &error);
    if (status != FW_OK)
        fail_msg("%s", error.text);
    return hook;
}

static void run_until_ended(struct bench *bench)
{
    int64_t deadline_ms = clock_machine_ms() + 20000;
    while (bench->end_count == 0) {
        assert_true(sd_event_run(bench->event, 100000) >= 0);
        assert_true(clock_machine_ms() < deadline_ms);
    }
    assert_int_equal(bench->end_count, 1);
}

static void run_script(struct bench *bench, const char *body, const char *input)
{
    char path[128];
    write_script(bench, body, 0755, path);
    start(bench, path, bench->folder, input);
    run_until_ended(bench);
}

static void exit_status_says_whether_it_was_passed_on(void **state)
{
    static const struct {
        const char *body;
        bool is_passed_on;
        const char *note;
    } rows[] = {{"exit 0", true, "exit 0"},
                {"exit 1", false, "exit 1"},
                {"echo modem busy >&2; exit 75", false, "exit 75: modem busy"},
                {"printf 'first\\nlast \\033[2J'; exit 3", false, "exit 3: last ?[2J"},
                {"kill -SEGV $$", false, "ended by signal 11 (Segmentation fault)"}};
    struct bench *bench = *state;
    for (size_t row = 0; row < sizeof rows / sizeof rows[0]; row++) {
        bench->end_count = 0;
        run_script(bench, rows[row].body, "{}");
        assert_string_equal(bench->end.note, rows[row].note);
        assert_int_equal(bench->end.is_passed_on, rows[row].is_passed_on);
        assert_false(bench->end.was_told_to_end);
    }
}

static void argument_environment_and_input_arrive_untouched(void **state)
{
    struct bench *bench = *state;
    setenv("NOTIFY_SOCKET", "/run/not/for/hooks", 1);
    setenv("FOREWATER_SECRET", "not for hooks", 1);
    const char *input = "{\"text\":\"Tallowick Ford\"}\nsecond line \xc3\xa9\n";
    run_script(
        bench,
        "cat >\"$1/input\"; /usr/bin/env -u PWD -u _ -u SHLVL -u OLDPWD >\"$1/env\"; echo \"$#\" >\"$1/count\"",
        input);
    unsetenv("NOTIFY_SOCKET");
    unsetenv("FOREWATER_SECRET");
    assert_true(bench->end.is_passed_on);
    char text[512];
    read_back(bench, "input", text, sizeof text);
    assert_string_equal(text, input);
    read_back(bench, "count", text, sizeof text);
    assert_string_equal(text, "1\n");
    read_back(bench, "env", text, sizeof text);
    assert_non_null(strstr(text, "PATH=/usr/sbin:/usr/bin:/sbin:/bin\n"));
    assert_non_null(strstr(text, "FOREWATER_NUMBER=412\n"));
    assert_int_equal(strlen(text), strlen("PATH=/usr/sbin:/usr/bin:/sbin:/bin\nFOREWATER_NUMBER=412\n"));
}

static void signals_are_at_their_default_and_nothing_but_the_standard_descriptors_is_open(void **state)
{
    struct bench *bench = *state;
    sigset_t blocked;
    sigset_t before;
    sigemptyset(&blocked);
    sigaddset(&blocked, SIGCHLD);
    sigaddset(&blocked, SIGTERM);
    sigprocmask(SIG_BLOCK, &blocked, &before);
    void (*pipe_before)(int) = signal(SIGPIPE, SIG_IGN);
    void (*user_before)(int) = signal(SIGUSR1, SIG_IGN);
    int leak = open("/dev/null", O_RDONLY); /* without O_CLOEXEC, as a careless library would */
    assert_true(leak >= 0);
    /* the listing itself holds one descriptor for the folder it lists */
    run_script(bench,
               "/bin/grep -E '^Sig(Blk|Ign)' /proc/self/status >\"$1/signals\"; /bin/ls /proc/self/fd >\"$1/open\"",
               "");
    close(leak);
    signal(SIGPIPE, pipe_before);
    signal(SIGUSR1, user_before);
    sigprocmask(SIG_SETMASK, &before, NULL);
    char text[256];
    read_back(bench, "signals", text, sizeof text);
    unsigned long long blocked_there = 1;
    unsigned long long ignored_there = 1;
    assert_int_equal(sscanf(text, "SigBlk: %llx SigIgn: %llx", &blocked_there, &ignored_there), 2);
    assert_true(blocked_there == 0);
    assert_true((ignored_there & ~0x180000000ull) == 0); /* 32 and 33 are the C library's own */
    read_back(bench, "open", text, sizeof text);
    assert_string_equal(text, "0\n1\n2\n3\n");
}

static void standard_descriptors_that_are_closed_in_us_do_not_mix_up_the_childs(void **state)
{
    struct bench *bench = *state;
    int kept = dup(STDIN_FILENO);
    close(STDIN_FILENO); /* the next descriptor opened is 0 */
    run_script(bench, "cat >\"$1/input\"; echo out; echo err >&2", "message");
    if (kept >= 0) {
        dup2(kept, STDIN_FILENO);
        close(kept);
    }
    char text[64];
    read_back(bench, "input", text, sizeof text);
    assert_string_equal(text, "message");
    assert_non_null(strstr(bench->said, "hook 'page-duty' #0412: out\nhook 'page-duty' #0412: err\n"));
}

static void an_input_larger_than_any_pipe_is_no_trouble_to_a_hook_that_does_not_read(void **state)
{
    struct bench *bench = *state;
    size_t length = 3000017;
    char *input = malloc(length + 1);
    assert_non_null(input);
    memset(input, 'x', length);
    input[length] = '\0';
    run_script(bench, "exit 0", input);
    assert_true(bench->end.is_passed_on);
    bench->end_count = 0;
    run_script(bench, "wc -c | tr -d ' '", input);
    assert_string_equal(bench->end.note, "exit 0: 3000017");
    free(input);
}

static void output_reaches_the_journal_up_to_the_limit_and_the_rest_is_counted(void **state)
{
    struct bench *bench = *state;
    /* 1 MiB and 17 bytes: 65536 are kept, 983057 are not */
    run_script(bench, "head -c 1048593 /dev/zero | tr '\\0' 'y'", "");
    assert_true(bench->end.is_passed_on);
    assert_non_null(strstr(bench->said, "wrote more than 65536 bytes; the 983057 after that are dropped"));
    size_t kept = 0;
    for (const char *byte = bench->said; *byte != '\0' && strncmp(byte, "wrote", 5) != 0; byte++)
        kept += *byte == 'y';
    /* lines of 512 equal bytes: the first is written, those that follow are counted by the journal */
    assert_non_null(strstr(bench->said, "(the line before came again, 127 times)"));
    assert_true(kept >= 512);
}

static void a_missing_or_forbidden_program_is_refused_with_its_path(void **state)
{
    struct bench *bench = *state;
    static const struct {
        const char *body;
        mode_t mode;
        const char *reason;
    } rows[] = {{NULL, 0, "No such file or directory"},
                {"exit 0", 0644, "Permission denied"}, /* not executable, not even by root */
                {"exit 0", 0000, "Permission denied"}};
    for (size_t row = 0; row < sizeof rows / sizeof rows[0]; row++) {
        char path[128];
        path_of(bench, "hook", path);
        if (rows[row].body != NULL)
            write_script(bench, rows[row].body, rows[row].mode, path);
        const char *argv[] = {path, NULL};
        struct hook_order order = {.name = "hook 'x'", .argv = argv, .environment = environment, .input = ""};
        struct hook *hook = NULL;
        struct fw_error error = {0};
        assert_int_equal(
            hook_start(bench->event, &bench->journal, &order, &bench->limits, take_end, bench, &hook, &error),
            FW_UNAVAILABLE);
        assert_null(hook);
        assert_non_null(strstr(error.text, path));
        assert_non_null(strstr(error.text, rows[row].reason));
    }
    assert_int_equal(bench->end_count, 0);
}

static void limit_descriptors(size_t highest)
{
    struct rlimit limit;
    assert_int_equal(getrlimit(RLIMIT_NOFILE, &limit), 0);
    limit.rlim_cur = highest;
    assert_int_equal(setrlimit(RLIMIT_NOFILE, &limit), 0);
}

static void without_descriptors_the_system_is_at_fault_and_nothing_is_left_running(void **state)
{
    struct bench *bench = *state;
    char path[128];
    write_script(bench, "exit 0", 0755, path);
    struct rlimit usual;
    assert_int_equal(getrlimit(RLIMIT_NOFILE, &usual), 0);
    int next = dup(STDOUT_FILENO);
    assert_true(next > STDERR_FILENO);
    close(next);
    size_t refused = 0;
    /* one descriptor more in each round: the memory file, the two ends of the pipe, the child's handle */
    for (size_t allowed = 0; allowed < 8 && bench->end_count == 0; allowed++) {
        const char *argv[] = {path, NULL};
        struct hook_order order = {.name = "hook 'x'", .argv = argv, .environment = environment, .input = ""};
        struct hook *hook = NULL;
        struct fw_error error = {0};
        limit_descriptors((size_t)next + allowed);
        enum fw_status status =
            hook_start(bench->event, &bench->journal, &order, &bench->limits, take_end, bench, &hook, &error);
        limit_descriptors(usual.rlim_cur);
        if (status == FW_OK) {
            run_until_ended(bench);
        } else {
            assert_int_equal(status, FW_IO);
            assert_null(hook);
            refused++;
        }
    }
    assert_true(refused >= 4);
    assert_int_equal(bench->end_count, 1);
}

static void a_hook_that_hangs_gets_term(void **state)
{
    struct bench *bench = *state;
    bench->limits = (struct hook_limits){.run_ms = 150, .grace_ms = 10000, .output_size = 65536};
    run_script(bench, "exec sleep 1000000", "");
    assert_string_equal(bench->end.note, "no end within 150 ms, TERM: ended by signal 15 (Terminated)");
    assert_false(bench->end.is_passed_on);
}

static void a_hook_that_ignores_term_gets_kill_and_so_does_all_of_its_group(void **state)
{
    struct bench *bench = *state;
    bench->limits = (struct hook_limits){.run_ms = 200, .grace_ms = 200, .output_size = 65536};
    run_script(bench, "trap '' TERM\nsleep 1000000 &\necho $! >\"$1/child\"\nwhile :; do sleep 1000000; done", "");
    assert_string_equal(bench->end.note, "no end within 200 ms, TERM and then KILL: ended by signal 9 (Killed)");
    char text[32];
    read_back(bench, "child", text, sizeof text);
    pid_t child = (pid_t)strtol(text, NULL, 10);
    assert_true(child > 1);
    for (int tries = 0; tries < 200 && kill(child, 0) == 0; tries++) {
        char path[64];
        char stat_line[256] = "";
        snprintf(path, sizeof path, "/proc/%d/stat", (int)child);
        FILE *file = fopen(path, "re");
        if (file != NULL) {
            stat_line[fread(stat_line, 1, sizeof stat_line - 1, file)] = '\0';
            fclose(file);
        }
        if (strstr(stat_line, ") Z ") != NULL || stat_line[0] == '\0')
            return; /* dead; whoever adopted it has yet to reap it */
        usleep(10000);
    }
    assert_int_equal(kill(child, 0), -1);
}

static void what_a_hook_leaves_behind_ends_with_it_and_does_not_keep_us_waiting(void **state)
{
    struct bench *bench = *state;
    int64_t began_ms = clock_machine_ms();
    run_script(bench, "sleep 1000000 &\necho started", "");
    assert_string_equal(bench->end.note, "exit 0: started");
    assert_true(clock_machine_ms() - began_ms < 15000); /* the child holds the pipe open, and still */
}

static void a_hook_told_to_end_says_so(void **state)
{
    struct bench *bench = *state;
    char path[128];
    write_script(bench, "exec sleep 1000000", 0755, path);
    struct hook *hook = start(bench, path, "", "");
    hook_tell_to_end(hook);
    hook_tell_to_end(hook);
    run_until_ended(bench);
    assert_true(bench->end.was_told_to_end);
    assert_string_equal(bench->end.note, "told to end: ended by signal 15 (Terminated)");
}

static void a_hook_told_to_end_that_does_not_is_killed_on_the_loop(void **state)
{
    struct bench *bench = *state;
    bench->limits.grace_ms = 150;
    char path[128];
    write_script(bench, "trap '' TERM\n: >\"$1/ready\"\nwhile :; do sleep 1000000; done", 0755, path);
    struct hook *hook = start(bench, path, bench->folder, "");
    char ready[128];
    path_of(bench, "ready", ready);
    for (int tries = 0; tries < 500 && access(ready, F_OK) != 0; tries++)
        usleep(10000);
    hook_tell_to_end(hook);
    run_until_ended(bench);
    assert_string_equal(bench->end.note, "told to end, then killed: ended by signal 9 (Killed)");
}

static void waiting_outside_the_loop_ends_at_its_deadline(void **state)
{
    struct bench *bench = *state;
    char path[128];
    write_script(bench, "trap '' TERM\nwhile :; do sleep 1000000; done", 0755, path);
    struct hook *hook = start(bench, path, "", "");
    hook_wait(hook, clock_machine_ms() + 150);
    assert_int_equal(bench->end_count, 1);
    assert_string_equal(bench->end.note, "told to end, then killed: ended by signal 9 (Killed)");
    bench->end_count = 0;
    write_script(bench, "exit 0", 0755, path);
    hook = start(bench, path, "", "");
    hook_wait(hook, clock_machine_ms() + 10000);
    assert_int_equal(bench->end_count, 1);
    assert_true(bench->end.is_passed_on);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test_setup_teardown(exit_status_says_whether_it_was_passed_on, set_up, tear_down),
        cmocka_unit_test_setup_teardown(argument_environment_and_input_arrive_untouched, set_up, tear_down),
        cmocka_unit_test_setup_teardown(signals_are_at_their_default_and_nothing_but_the_standard_descriptors_is_open,
                                        set_up, tear_down),
        cmocka_unit_test_setup_teardown(standard_descriptors_that_are_closed_in_us_do_not_mix_up_the_childs, set_up,
                                        tear_down),
        cmocka_unit_test_setup_teardown(an_input_larger_than_any_pipe_is_no_trouble_to_a_hook_that_does_not_read,
                                        set_up, tear_down),
        cmocka_unit_test_setup_teardown(output_reaches_the_journal_up_to_the_limit_and_the_rest_is_counted, set_up,
                                        tear_down),
        cmocka_unit_test_setup_teardown(a_missing_or_forbidden_program_is_refused_with_its_path, set_up, tear_down),
        cmocka_unit_test_setup_teardown(without_descriptors_the_system_is_at_fault_and_nothing_is_left_running,
                                        set_up, tear_down),
        cmocka_unit_test_setup_teardown(a_hook_that_hangs_gets_term, set_up, tear_down),
        cmocka_unit_test_setup_teardown(a_hook_that_ignores_term_gets_kill_and_so_does_all_of_its_group, set_up,
                                        tear_down),
        cmocka_unit_test_setup_teardown(what_a_hook_leaves_behind_ends_with_it_and_does_not_keep_us_waiting, set_up,
                                        tear_down),
        cmocka_unit_test_setup_teardown(a_hook_told_to_end_says_so, set_up, tear_down),
        cmocka_unit_test_setup_teardown(a_hook_told_to_end_that_does_not_is_killed_on_the_loop, set_up, tear_down),
        cmocka_unit_test_setup_teardown(waiting_outside_the_loop_ends_at_its_deadline, set_up, tear_down),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
