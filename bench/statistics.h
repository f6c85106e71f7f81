/* The clock, and figures: the median of repeated measurements with the least and the most beside it. */
#ifndef BENCH_STATISTICS_H
#define BENCH_STATISTICS_H

/* Wall clock in seconds, from some moment on. */
double now(void);

/* Lets threads that wait actively fall asleep, so that they disturb nothing of what is measured next. */
void settle(void);

/* One measured quantity, repeated. */
struct figure {
    const char *name;
    double *values;
    int count, room;
};

struct figure figure_of(const char *name, int repetitions);
void figure_add(struct figure *figure, double value);
/* Median of the values so far. */
double figure_median(const struct figure *figure);
/* Prints "name median", "name_min least", "name_max most", and lets go of the values. */
void figure_tell(struct figure *figure);

/* Prints a figure that is one number. */
void tell(const char *name, double value);

/* Ends the program with a reason. */
#if defined(__GNUC__)
__attribute__((noreturn, format(printf, 1, 2)))
#endif
void give_up(const char *format, ...);

/* A whole number of the command line that must lie within bounds. */
long long number_of(const char *what, const char *text, long long least, long long most);

#endif
