/* SPDX-License-Identifier: MIT */
/*
 * A fuzz target without libFuzzer, in any build.
 *     fuzz_X_replay FILE-OR-FOLDER...    runs the inputs of a corpus
 *     fuzz_X_replay --draw COUNT SEED    runs inputs drawn at random: blind, but fifty times as fast
 * An input that fails is left in the file fuzz_failed.
 */
#include <dirent.h>
#include <errno.h>
#include <fcntl.h>
#include <signal.h>
#include <unistd.h>

#include "tests/fuzz/fuzz.h"

static struct {
    const uint8_t *bytes;
    size_t size;
} present; /* at file scope for the handler's sake */

static void keep_failed(int signal_number)
{
    int file = open("fuzz_failed", O_WRONLY | O_CREAT | O_TRUNC, 0644);
    if (file >= 0 && write(file, present.bytes, present.size) == (ssize_t)present.size)
        close(file);
    signal(signal_number, SIG_DFL);
    raise(signal_number);
}

static void run(const uint8_t *bytes, size_t size)
{
    present.bytes = bytes;
    present.size = size;
    LLVMFuzzerTestOneInput(bytes, size);
}

static uint64_t next_random(uint64_t *seed)
{
    *seed ^= *seed << 13;
    *seed ^= *seed >> 7;
    *seed ^= *seed << 17;
    return *seed;
}

/* Now and then a stretch of one value, as even bytes alone make even rivers. */
static void draw_inputs(unsigned long count, uint64_t seed)
{
    enum { LONGEST = 1024 };
    for (unsigned long i = 0; i < count; i++) {
        size_t size = 64 + (size_t)(next_random(&seed) % (LONGEST - 64));
        uint8_t *bytes = fuzz_room(size, 1);
        for (size_t at = 0; at < size; at++)
            bytes[at] = (uint8_t)(next_random(&seed) >> 32);
        for (uint64_t stretch = next_random(&seed) % 4; stretch > 0; stretch--) {
            size_t from = (size_t)(next_random(&seed) % size), length = (size_t)(next_random(&seed) % 200);
            memset(bytes + from, (int)(next_random(&seed) >> 32 & 0xff), length < size - from ? length : size - from);
        }
        run(bytes, size);
        free(bytes);
    }
}

static void replay_file(const char *path)
{
    enum { LARGEST = 1 << 20 };
    FILE *file = fopen(path, "rb");
    if (file == NULL)
        fuzz_fail("%s: %s", path, strerror(errno));
    uint8_t *bytes = fuzz_room(LARGEST, 1);
    size_t size = fread(bytes, 1, LARGEST, file);
    fclose(file);
    uint8_t *exact = fuzz_room(size, 1); /* so that one byte too far is seen by a sanitizer */
    memcpy(exact, bytes, size);
    printf("%s, %zu bytes\n", path, size);
    fflush(stdout);
    run(exact, size);
    free(exact);
    free(bytes);
}

static size_t replay(const char *path)
{
    DIR *folder = opendir(path);
    if (folder == NULL) {
        replay_file(path);
        return 1;
    }
    size_t count = 0;
    for (struct dirent *entry; (entry = readdir(folder)) != NULL;) {
        char inside[4096];
        if (entry->d_name[0] == '.')
            continue;
        int length = snprintf(inside, sizeof inside, "%s/%s", path, entry->d_name);
        if (length < 0 || (size_t)length >= sizeof inside)
            fuzz_fail("%s: the path is too long", path);
        replay_file(inside);
        count++;
    }
    closedir(folder);
    return count;
}

int main(int argc, char *argv[])
{
    size_t count = 0;
    signal(SIGABRT, keep_failed);
    signal(SIGSEGV, keep_failed);
    if (argc == 4 && strcmp(argv[1], "--draw") == 0) {
        draw_inputs(strtoul(argv[2], NULL, 10), strtoull(argv[3], NULL, 10) * 0x9e3779b97f4a7c15u + 1);
        printf("%s inputs drawn, seed %s\n", argv[2], argv[3]);
        return 0;
    }
    for (int i = 1; i < argc; i++)
        count += replay(argv[i]);
    if (count == 0)
        fuzz_fail("nothing was replayed");
    printf("%zu inputs replayed\n", count);
    return 0;
}
