/* Stand-in for <getopt.h>. */
#ifndef STEPRING_GETOPT_H
#define STEPRING_GETOPT_H
#define no_argument 0
#define required_argument 1
#define optional_argument 2
struct option { const char *name; int has_arg; int *flag; int val; };
extern char *optarg;
extern int optind;
int getopt (int count, char *const arguments[], const char *options);
int getopt_long (int count, char *const arguments[], const char *options, const struct option *names, int *place);
#endif
