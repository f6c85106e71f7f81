/*
 * What is wrong at opening is said precisely, nothing is opened, the handle is NULL and every call answers it; the next
 * attempt with the right arguments works.
 *
 * variants: valgrind sanitizer
 */
#define _GNU_SOURCE
#include "check.h"

#include <sys/resource.h>

static void write_file(const char *path, const void *bytes, size_t length)
{
    FILE *file = fopen(path, "wb");
    if (!file || fwrite(bytes, 1, length, file) != length || fclose(file)) check_fail(0, "cannot write %s", path);
}

static const char *in_folder(const char *name)
{
    static char paths[4][640];
    static int next;
    char *path = paths[next++ % 4];
    snprintf(path, sizeof paths[0], "%s/%s", check_folder, name);
    return path;
}

static void test(void)
{
    static struct universe all;
    limno_options options = LIMNO_OPTIONS_INIT;
    limno_run *const stale = (limno_run *)(uintptr_t)0x1234;
    limno_run *run = stale;
    char good[640], series[640];
    snprintf(good, sizeof good, "%s", in_folder("limnograph.toml"));
    snprintf(series, sizeof series, "%s", in_folder("run.limno"));
    write_file(good, check_config, strlen(check_config));

#define FAILS(version, config, series_, options_, status, ...)                                           \
    run = stale;                                                                                          \
    REFUSED(NULL, limno_open(version, config, series_, options_, &run), status, __VA_ARGS__);             \
    CHECK(run == NULL, "the handle after a failure is %p", (void *)run);                                  \
    REFUSED(NULL, limno_enter(run), LIMNO_CLOSED, "null")

    /* Versions: major × 10000 + minor × 100 + patch. */
    FAILS(0, good, series, NULL, LIMNO_BAD_VERSION, "0.0.0", "rebuild");
    FAILS(LIMNO_VERSION + 100, good, series, NULL, LIMNO_BAD_VERSION, "rebuild", "LIMNO_VERSION");
    FAILS(LIMNO_VERSION + 10000, good, series, NULL, LIMNO_BAD_VERSION, "1.1.0");
    FAILS(UINT32_MAX, good, series, NULL, LIMNO_BAD_VERSION, "rebuild");
    /* A patch is no other interface. */
    EXPECT(NULL, limno_open(LIMNO_VERSION + 7, good, series_path("patch"), NULL, &run), LIMNO_OK);
    EXPECT(run, limno_close(run), LIMNO_OK);

    /* Null. */
    FAILS(LIMNO_VERSION, NULL, series, NULL, LIMNO_BAD_ARGUMENT, "`config`", "null");
    FAILS(LIMNO_VERSION, good, NULL, NULL, LIMNO_BAD_ARGUMENT, "`series`", "null");
    REFUSED(NULL, limno_open(LIMNO_VERSION, good, series, NULL, NULL), LIMNO_BAD_ARGUMENT, "`run` is null");
    CHECK(access(series, F_OK) != 0, "a series was made for a handle that has no place");

    /* The config. */
    FAILS(LIMNO_VERSION, in_folder("missing.toml"), series, NULL, LIMNO_BAD_CONFIG, "missing.toml", "No such file");
    FAILS(LIMNO_VERSION, check_folder, series, NULL, LIMNO_BAD_CONFIG, check_folder, "cannot be read");
    FAILS(LIMNO_VERSION, "", series, NULL, LIMNO_BAD_CONFIG, "cannot be read");
    FAILS(LIMNO_VERSION, "/dev/zero", series, NULL, LIMNO_BAD_CONFIG, "/dev/zero");
    FAILS(LIMNO_VERSION, "/dev/null", series, NULL, LIMNO_BAD_CONFIG, "/dev/null", "units");
    write_file(in_folder("latin.toml"), "# caf\xe9\n", 7);
    FAILS(LIMNO_VERSION, in_folder("latin.toml"), series, NULL, LIMNO_BAD_CONFIG, "latin.toml", "UTF-8");
    write_file(in_folder("zero.toml"), "a = 1\0b = 2\n", 12);
    FAILS(LIMNO_VERSION, in_folder("zero.toml"), series, NULL, LIMNO_BAD_CONFIG, "zero.toml:1");
    write_file(in_folder("typo.toml"), CHECK_BASE "[gauges]\nstar_fromation = true\n",
               strlen(CHECK_BASE "[gauges]\nstar_fromation = true\n"));
    FAILS(LIMNO_VERSION, in_folder("typo.toml"), series, NULL, LIMNO_BAD_CONFIG, "typo.toml:16", "star_fromation", "star_formation");
    char *huge = malloc(3 << 20);
    memset(huge, '#', 3 << 20);
    write_file(in_folder("huge.toml"), huge, 3 << 20);
    free(huge);
    FAILS(LIMNO_VERSION, in_folder("huge.toml"), series, NULL, LIMNO_BAD_CONFIG, "huge.toml");
    FAILS(LIMNO_VERSION, "\xff\xfe", series, NULL, LIMNO_BAD_ARGUMENT, "`config`", "UTF-8");

    /* The series. */
    FAILS(LIMNO_VERSION, good, "", NULL, LIMNO_DISK, ".limno");
    FAILS(LIMNO_VERSION, good, in_folder("run"), NULL, LIMNO_DISK, "run", ".limno");
    FAILS(LIMNO_VERSION, good, in_folder("no/such/run.limno"), NULL, LIMNO_DISK, "no/such/run.limno", "does not exist", "create");
    write_file(in_folder("file.limno"), "words", 5);
    FAILS(LIMNO_VERSION, good, in_folder("file.limno"), NULL, LIMNO_DISK, "file.limno", "not a directory");
    FAILS(LIMNO_VERSION, good, in_folder("file.limno/run.limno"), NULL, LIMNO_DISK, "run.limno");
    mkdir(in_folder("full.limno"), 0755);
    write_file(in_folder("full.limno/thesis.tex"), "words", 5);
    FAILS(LIMNO_VERSION, good, in_folder("full.limno"), NULL, LIMNO_DISK, "full.limno", "other things");
    FAILS(LIMNO_VERSION, good, "/proc/run.limno", NULL, LIMNO_DISK, "/proc/run.limno");

    /* The options. */
    options.host_name = "\xc3(";
    FAILS(LIMNO_VERSION, good, series, &options, LIMNO_BAD_ARGUMENT, "`host_name`", "UTF-8");
    options.host_name = "a host", options.threads = -1;
    FAILS(LIMNO_VERSION, good, series, &options, LIMNO_BAD_ARGUMENT, "`threads` is -1");
    options.threads = 1 << 20;
    FAILS(LIMNO_VERSION, good, series, &options, LIMNO_BAD_ARGUMENT, "`threads`");
    options.threads = 0, options.config_text = "[units";
    FAILS(LIMNO_VERSION, "name.toml", series, &options, LIMNO_BAD_CONFIG, "name.toml:1");
    FAILS(LIMNO_VERSION, good, series, (limno_options *)((char *)&options + 1), LIMNO_BAD_ARGUMENT, "`options`", "misaligned");

    /* MPI is not in this library. */
    options.config_text = check_config;
    int handle = 0;
    run = stale;
    REFUSED(NULL, limno_open_communicator(LIMNO_VERSION, good, series, NULL, &handle, sizeof handle, NULL, &run),
            LIMNO_BAD_MPI, "without MPI", "liblimnograph_mpi");
    CHECK(run == NULL, "the handle after a failure is %p", (void *)run);
    run = stale;
    REFUSED(NULL, limno_open_fortran(LIMNO_VERSION, good, series, NULL, 0, &run), LIMNO_BAD_MPI, "liblimnograph_mpi");
    CHECK(run == NULL, "the handle after a failure is %p", (void *)run);

    CHECK(access(series, F_OK) != 0, "a failed opening left a series behind");
    EXPECT(NULL, limno_open(LIMNO_VERSION, NULL, series, &options, &run), LIMNO_OK);
    fill_universe(&all);
    GOOD_STEP(run, 1, &all);
    EXPECT(run, limno_close(run), LIMNO_OK);
    CELL(read_back(series, "run"), 1, "black_holes", HOLES);
}
