/* Logs what a process does to the files of one folder, in order: for faults_power.py. Preloaded; changes nothing.

   One record: kind (W write, T truncate, S sync, U unlink), nanoseconds of the wall clock, offset or size, length of the
   path, length of the data; then path and data. The record of a write stands before the write, that of a sync after it:
   the replay can then only know less to be on the disk than there was. */
#define _GNU_SOURCE
#include <dlfcn.h>
#include <fcntl.h>
#include <pthread.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <sys/uio.h>
#include <time.h>
#include <unistd.h>

struct record { int64_t kind, ns, at, path_bytes, data_bytes; };
static pthread_mutex_t guard = PTHREAD_MUTEX_INITIALIZER;
static int out = -1;

#define REAL(name) static __typeof__(name) *real; if (!real) real = (__typeof__(name) *)dlsym(RTLD_NEXT, #name)

static int ours(int fd, char *path, size_t room) {
  const char *folder = getenv("FAULTS_FOLDER");
  char link[64];
  if (!folder) return 0;
  snprintf(link, sizeof link, "/proc/self/fd/%d", fd);
  ssize_t size = readlink(link, path, room - 1);
  if (size <= 0) return 0;
  path[size] = 0;
  return strncmp(path, folder, strlen(folder)) == 0 && !strstr(path, "-shm") && !strstr(path, ".lock");
}

static void note(char kind, const char *path, int64_t at, const void *data, size_t size) {
  struct timespec now;
  pthread_mutex_lock(&guard);
  clock_gettime(CLOCK_REALTIME, &now);
  if (out < 0) out = open(getenv("FAULTS_LOG"), O_WRONLY | O_CREAT | O_APPEND | O_CLOEXEC, 0600);
  struct record head = {kind, now.tv_sec * 1000000000LL + now.tv_nsec, at, (int64_t)strlen(path), (int64_t)size};
  struct iovec parts[3] = {{&head, sizeof head}, {(void *)path, strlen(path)}, {(void *)data, size}};
  if (writev(out, parts, 3) < 0) abort();
  pthread_mutex_unlock(&guard);
}

ssize_t pwrite64(int fd, const void *data, size_t size, off64_t at) {
  REAL(pwrite64);
  char path[4096];
  if (ours(fd, path, sizeof path)) note('W', path, at, data, size);
  return real(fd, data, size, at);
}

ssize_t pwrite(int fd, const void *data, size_t size, off_t at) { return pwrite64(fd, data, size, at); }

ssize_t write(int fd, const void *data, size_t size) {
  REAL(write);
  char path[4096];
  if (ours(fd, path, sizeof path)) note('W', path, lseek(fd, 0, SEEK_CUR), data, size);
  return real(fd, data, size);
}

int ftruncate64(int fd, off64_t size) {
  REAL(ftruncate64);
  char path[4096];
  if (ours(fd, path, sizeof path)) note('T', path, size, "", 0);
  return real(fd, size);
}

int ftruncate(int fd, off_t size) { return ftruncate64(fd, size); }

int fdatasync(int fd) {
  REAL(fdatasync);
  char path[4096];
  int done = real(fd);
  if (!done && ours(fd, path, sizeof path)) note('S', path, 0, "", 0);
  return done;
}

int fsync(int fd) {
  REAL(fsync);
  char path[4096];
  int done = real(fd);
  if (!done && ours(fd, path, sizeof path)) note('S', path, 0, "", 0);
  return done;
}

int unlink(const char *path) {
  REAL(unlink);
  const char *folder = getenv("FAULTS_FOLDER");
  if (folder && strncmp(path, folder, strlen(folder)) == 0) note('U', path, 0, "", 0);
  return real(path);
}
