/* SPDX-License-Identifier: MIT */
/*
 * Plays the service manager's end of NOTIFY_SOCKET: prints each notification, one line of it a line, as it arrives.
 *     notify_listener SOCKET      until it is killed; makes SOCKET anew
 */
#include <stdio.h>
#include <string.h>
#include <sys/socket.h>
#include <sys/un.h>
#include <unistd.h>

int main(int argument_count, char *arguments[])
{
    struct sockaddr_un address = {.sun_family = AF_UNIX};
    char text[4096];
    if (argument_count != 2 || strlen(arguments[1]) >= sizeof address.sun_path) {
        fprintf(stderr, "usage: notify_listener SOCKET (of at most %zu bytes)\n", sizeof address.sun_path - 1);
        return 64;
    }
    memcpy(address.sun_path, arguments[1], strlen(arguments[1]) + 1);
    unlink(arguments[1]);
    int listener = socket(AF_UNIX, SOCK_DGRAM | SOCK_CLOEXEC, 0);
    if (listener < 0 || bind(listener, (const struct sockaddr *)&address, sizeof address) != 0) {
        perror(arguments[1]);
        return 71;
    }
    for (ssize_t length; (length = recv(listener, text, sizeof text, 0)) >= 0;) {
        printf("%.*s%s", (int)length, text, length > 0 && text[length - 1] == '\n' ? "" : "\n");
        fflush(stdout);
    }
    perror(arguments[1]);
    return 71;
}
