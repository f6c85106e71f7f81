#include "statistics.h"

#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

double now(void)
{
    struct timespec time;
    clock_gettime(CLOCK_MONOTONIC, &time);
    return (double)time.tv_sec + 1e-9 * (double)time.tv_nsec;
}

void settle(void)
{
    struct timespec pause = { 0, 3000000 };
    nanosleep(&pause, NULL);
}

void give_up(const char *format, ...)
{
    va_list list;
    va_start(list, format);
    fputs("bench: ", stderr);
    vfprintf(stderr, format, list);
    fputc('\n', stderr);
    va_end(list);
    exit(1);
}

long long number_of(const char *what, const char *text, long long least, long long most)
{
    char *end = NULL;
    long long value = strtoll(text, &end, 10);
    if (end == text || *end != '\0' || value < least || value > most)
        give_up("%s is '%s'; expected a whole number from %lld to %lld", what, text, least, most);
    return value;
}

struct figure figure_of(const char *name, int repetitions)
{
    struct figure figure = { name, malloc(sizeof(double) * (size_t)repetitions), 0, repetitions };
    if (figure.values == NULL)
        give_up("no memory for %d repetitions", repetitions);
    return figure;
}

void figure_add(struct figure *figure, double value)
{
    if (figure->count < figure->room)
        figure->values[figure->count++] = value;
}

static int by_size(const void *one, const void *other)
{
    double a = *(const double *)one, b = *(const double *)other;
    return (a > b) - (a < b);
}

double figure_median(const struct figure *figure)
{
    qsort(figure->values, (size_t)figure->count, sizeof(double), by_size);
    int middle = figure->count / 2;
    return figure->count % 2 == 1 ? figure->values[middle]
                                  : 0.5 * (figure->values[middle - 1] + figure->values[middle]);
}

void figure_tell(struct figure *figure)
{
    if (figure->count > 0) {
        double median = figure_median(figure);
        printf("%s %.6g\n%s_min %.6g\n%s_max %.6g\n", figure->name, median, figure->name,
               figure->values[0], figure->name, figure->values[figure->count - 1]);
        fflush(stdout);
    }
    free(figure->values);
    *figure = (struct figure){ figure->name, NULL, 0, 0 };
}

void tell(const char *name, double value)
{
    printf("%s %.9g\n", name, value);
    fflush(stdout);
}
