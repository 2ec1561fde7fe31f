/* SPDX-License-Identifier: MIT */
/*
 * Runs the built executable as a person would: arguments, a file or pipe in, texts and an exit code out.
 * Include <cmocka.h> with its companions first.
 *
 *     struct run run = RUN(NULL, "route", "--config", path, ...);     the first argument: what stdin says, or NULL
 *     assert_run(&run, EX_OK);
 *     struct routed routed = routed_read(&run);                        the CSV that route prints
 *     double peak = routed_value(&routed, row, "end.discharge_m3s");
 *     routed_clear(&routed);
 *     run_clear(&run);
 */
#ifndef FOREWATER_TESTS_SCENARIOS_RUN_FOREWATER_H
#define FOREWATER_TESTS_SCENARIOS_RUN_FOREWATER_H

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/wait.h>
#include <unistd.h>

#include "daemon/buffer.h"

struct run {
    int exit_code; /* -1: ended by a signal */
    char *output, *errors;
};

/* The executable's arguments after its own name; `input` becomes its standard input. */
#define RUN(input, ...) run_forewater(input, (const char *const[]){FW_EXECUTABLE, __VA_ARGS__, NULL})

static inline char *run_whole_text(FILE *file)
{
    struct text text = {0};
    char bytes[65536];
    rewind(file);
    for (size_t count; (count = fread(bytes, 1, sizeof bytes, file)) > 0;)
        text_add_bytes(&text, bytes, count);
    fclose(file);
    if (text.bytes == NULL)
        text_add(&text, "%s", "");
    assert_int_equal(text_status(&text), FW_OK);
    return text.bytes != NULL ? text.bytes : strdup("");
}

static inline struct run run_forewater(const char *input, const char *const arguments[])
{
    struct run run = {.exit_code = -1};
    FILE *output = tmpfile(), *errors = tmpfile();
    int pipe_in[2];
    assert_non_null(output);
    assert_non_null(errors);
    assert_int_equal(pipe(pipe_in), 0);
    pid_t child = fork();
    assert_true(child >= 0);
    if (child == 0) {
        if (dup2(pipe_in[0], STDIN_FILENO) < 0 || dup2(fileno(output), STDOUT_FILENO) < 0 ||
            dup2(fileno(errors), STDERR_FILENO) < 0)
            _exit(126);
        close(pipe_in[0]);
        close(pipe_in[1]);
        execv(arguments[0], (char *const *)(const void *)arguments);
        _exit(127);
    }
    close(pipe_in[0]);
    if (input != NULL) /* short enough for the pipe: never blocks */
        assert_int_equal(write(pipe_in[1], input, strlen(input)), strlen(input));
    close(pipe_in[1]);
    int status = 0;
    assert_int_equal(waitpid(child, &status, 0), child);
    if (WIFEXITED(status))
        run.exit_code = WEXITSTATUS(status);
    run.output = run_whole_text(output);
    run.errors = run_whole_text(errors);
    return run;
}

static inline void run_clear(struct run *run)
{
    free(run->output);
    free(run->errors);
    *run = (struct run){0};
}

static inline void assert_run(const struct run *run, int exit_code)
{
    if (run->exit_code != exit_code)
        fail_msg("exit code %d instead of %d\n%.2000s%.2000s", run->exit_code, exit_code, run->errors, run->output);
}

static inline void assert_says(const char *text, const char *expected)
{
    if (strstr(text, expected) == NULL)
        fail_msg("'%s' is not in:\n%.6000s", expected, text);
}

/* Wherever the lines are broken. */
static inline void assert_says_in_lines(const char *text, const char *expected)
{
    char *unbroken = strdup(text);
    assert_non_null(unbroken);
    for (char *byte = unbroken; *byte != '\0'; byte++)
        if (*byte == '\n')
            *byte = ' ';
    bool is_said = strstr(unbroken, expected) != NULL;
    free(unbroken);
    if (!is_said)
        fail_msg("'%s' is not in:\n%.6000s", expected, text);
}

#define assert_near(actual, expected, tolerance) assert_near_at(actual, expected, tolerance, __FILE__, __LINE__)
static inline void assert_near_at(double actual, double expected, double tolerance, const char *file, int line)
{
    if (!(fabs(actual - expected) <= tolerance)) {
        print_error("%.12g is not within %g of %.12g\n", actual, tolerance, expected);
        _fail(file, line);
    }
}

/* A folder of the test's own. Paths that it gives stay valid for SCRATCH_PATHS more. */
enum { SCRATCH_PATHS = 16 };
struct scratch {
    char folder[32];
    size_t next;
    char path[SCRATCH_PATHS][256];
};

static inline struct scratch scratch_open(void)
{
    struct scratch scratch = {.folder = "/tmp/forewater-test-XXXXXX"};
    assert_non_null(mkdtemp(scratch.folder));
    return scratch;
}

/* Writes a file in it and gives its path. */
static inline const char *scratch_file(struct scratch *scratch, const char *name, const char *text)
{
    char *path = scratch->path[scratch->next++ % SCRATCH_PATHS];
    char folder[sizeof scratch->folder];
    memcpy(folder, scratch->folder, sizeof folder);
    snprintf(path, sizeof scratch->path[0], "%s/%s", folder, name);
    FILE *file = fopen(path, "w");
    assert_non_null(file);
    assert_true(fputs(text, file) >= 0);
    assert_int_equal(fclose(file), 0);
    return path;
}

/* The same as an argument of --inflow. */
static inline const char *scratch_inflow(struct scratch *scratch, const char *gauge, const char *text)
{
    char name[32], folder[sizeof scratch->folder];
    snprintf(name, sizeof name, "%zu.csv", scratch->next);
    scratch_file(scratch, name, text);
    memcpy(folder, scratch->folder, sizeof folder);
    char *argument = scratch->path[scratch->next++ % SCRATCH_PATHS];
    snprintf(argument, sizeof scratch->path[0], "%s=%s/%s", gauge, folder, name);
    return argument;
}

static inline void scratch_close(struct scratch *scratch)
{
    char command[64];
    snprintf(command, sizeof command, "rm -r '%s'", scratch->folder);
    assert_int_equal(system(command), 0);
}

/* --- what route prints ------------------------------------------------------------------------------------------ */

struct routed {
    size_t column_count, row_count; /* the header is not a row */
    char *text;
    char **cell; /* the header's cells, then row by row */
};

static inline struct routed routed_read(const struct run *run)
{
    struct routed routed = {.text = strdup(run->output)};
    size_t count = 0, lines = 0, capacity = 0;
    assert_non_null(routed.text);
    for (char *line = routed.text; *line != '\0'; lines++) {
        char *end = strchr(line, '\n');
        assert_non_null(end); /* no line is cut short */
        *end = '\0';
        size_t before = count;
        for (char *cell = line; cell != NULL;) {
            char *comma = strchr(cell, ',');
            if (comma != NULL)
                *comma++ = '\0';
            assert_int_equal(buffer_grow(&routed.cell, &capacity, count, sizeof *routed.cell), FW_OK);
            routed.cell[count++] = cell;
            cell = comma;
        }
        if (lines == 0)
            routed.column_count = count;
        assert_int_equal(count - before, routed.column_count);
        line = end + 1;
    }
    assert_true(lines >= 2);
    routed.row_count = lines - 1;
    return routed;
}

static inline void routed_clear(struct routed *routed)
{
    free(routed->cell);
    free(routed->text);
    *routed = (struct routed){0};
}

static inline const char *routed_time(const struct routed *routed, size_t row)
{
    assert_true(row < routed->row_count);
    return routed->cell[(row + 1) * routed->column_count];
}

static inline size_t routed_column(const struct routed *routed, const char *name)
{
    for (size_t column = 0; column < routed->column_count; column++)
        if (strcmp(routed->cell[column], name) == 0)
            return column;
    fail_msg("no column '%s'", name);
    return 0;
}

static inline double routed_value(const struct routed *routed, size_t row, const char *name)
{
    assert_true(row < routed->row_count);
    char *end;
    double value = strtod(routed->cell[(row + 1) * routed->column_count + routed_column(routed, name)], &end);
    assert_true(*end == '\0' && isfinite(value));
    return value;
}

/* By the trapezoidal rule over all rows, whose times are plain seconds. */
static inline double routed_volume_m3(const struct routed *routed, const char *name)
{
    double volume_m3 = 0.0;
    for (size_t row = 1; row < routed->row_count; row++)
        volume_m3 += 0.5 * (routed_value(routed, row, name) + routed_value(routed, row - 1, name)) *
                     (strtod(routed_time(routed, row), NULL) - strtod(routed_time(routed, row - 1), NULL));
    return volume_m3;
}

static inline size_t routed_peak_row(const struct routed *routed, const char *name)
{
    size_t peak = 0;
    for (size_t row = 1; row < routed->row_count; row++)
        if (routed_value(routed, row, name) > routed_value(routed, peak, name))
            peak = row;
    return peak;
}

#endif
