/* The verbs of the tool `hushwatch`: one file each, one line each in verb.c. */
#ifndef VERB_VERB_H
#define VERB_VERB_H

/* Exit codes of every verb. */
enum verb_exit {
    VERB_GOOD = 0,
    VERB_FOUND_WRONG = 1, /* the check found something wrong */
    VERB_WRONG_USE = 2,   /* the command line or the settings */
    VERB_SYSTEM = 3       /* the system failed: a file, the disk, memory */
};

struct verb {
    const char *name;
    const char *help; /* one line */
    /* argv[0] is the verb; prints to standard output, errors to standard error; gives an exit code. */
    int (*run)(int argc, char **argv);
};

/* The table, closed by a NULL name. */
extern const struct verb verbs[];

int verb_explain(int argc, char **argv);
int verb_fieldcheck(int argc, char **argv);
int verb_verify(int argc, char **argv);
int verb_report(int argc, char **argv);
int verb_review(int argc, char **argv);
int verb_rerun(int argc, char **argv);
int verb_render(int argc, char **argv);
int verb_scan(int argc, char **argv);
int verb_user(int argc, char **argv);

#endif
