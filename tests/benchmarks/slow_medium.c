/* LD_PRELOAD: writes and syncs below SLOW_MEDIUM take the time a slow stick takes (SLOW_KB_S, default 500 kB/s, 30 ms a sync). */
#define _GNU_SOURCE
#include <dlfcn.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/types.h>
#include <time.h>
#include <unistd.h>

static int slow(int fd)
{
    char link[64], path[4096];
    const char *medium = getenv("SLOW_MEDIUM");
    snprintf(link, sizeof link, "/proc/self/fd/%d", fd);
    ssize_t size = medium ? readlink(link, path, sizeof path - 1) : -1;
    if (size < 0) return 0;
    path[size] = 0;
    return strncmp(path, medium, strlen(medium)) == 0;
}

static void pause_ms(double ms)
{
    struct timespec time = {(time_t)(ms / 1000), (long)(ms * 1e6) % 1000000000L};
    nanosleep(&time, NULL);
}

static void pause_for(int fd, size_t bytes)
{
    const char *rate = getenv("SLOW_KB_S");
    if (slow(fd)) pause_ms((double)bytes / (rate ? atof(rate) : 500.0));
}

ssize_t pwrite64(int fd, const void *data, size_t size, off64_t at)
{
    static ssize_t (*real)(int, const void *, size_t, off64_t);
    if (!real) real = dlsym(RTLD_NEXT, "pwrite64");
    pause_for(fd, size);
    return real(fd, data, size, at);
}

ssize_t pwrite(int fd, const void *data, size_t size, off_t at) { return pwrite64(fd, data, size, at); }

ssize_t write(int fd, const void *data, size_t size)
{
    static ssize_t (*real)(int, const void *, size_t);
    if (!real) real = dlsym(RTLD_NEXT, "write");
    pause_for(fd, size);
    return real(fd, data, size);
}

int fdatasync(int fd)
{
    static int (*real)(int);
    if (!real) real = dlsym(RTLD_NEXT, "fdatasync");
    if (slow(fd)) pause_ms(30);
    return real(fd);
}

int fsync(int fd)
{
    static int (*real)(int);
    if (!real) real = dlsym(RTLD_NEXT, "fsync");
    if (slow(fd)) pause_ms(30);
    return real(fd);
}
