/* docs/ledger.md against the views that the program makes: the same kinds, each with the same columns, and
 * the same number of the format. */
#include "support/test.h"

#include "record/views.h"
#include <ctype.h>
#include <stdbool.h>
#include <stdlib.h>

#define MAX_COLUMNS 80
#define NAME_SIZE 64

static char *document;

struct columns {
    unsigned n;
    char names[MAX_COLUMNS][NAME_SIZE];
};

static bool has(const struct columns *columns, const char *name)
{
    for (unsigned i = 0; i < columns->n; i++)
        if (strcmp(columns->names[i], name) == 0)
            return true;
    return false;
}

static void add(struct columns *columns, const char *name, size_t length)
{
    assert_true(columns->n < MAX_COLUMNS && length < NAME_SIZE);
    snprintf(columns->names[columns->n++], NAME_SIZE, "%.*s", (int)length, name);
}

static bool is_of_name(char c)
{
    return islower((unsigned char)c) || isdigit((unsigned char)c) || c == '_';
}

/* What follows each AS of a statement: a view's name first, then its columns. `second` is the name of a table
 * within the statement. */
static struct columns of_view(const char *sql)
{
    struct columns columns = {0};
    const char *at = strstr(sql, " AS SELECT ");
    assert_non_null(at);
    for (at += 4; (at = strstr(at, " AS "));) {
        at += 4 + (at[4] == '"');
        size_t length = strspn(at, "abcdefghijklmnopqrstuvwxyz0123456789_");
        if (length > 0 && (length != 6 || memcmp(at, "second", 6) != 0))
            add(&columns, at, length);
    }
    return columns;
}

/* The row of a view in the table of columns, without what stands in brackets; NULL where there is none. */
static char *row_of(const char *view)
{
    char start[NAME_SIZE + 8];
    snprintf(start, sizeof start, "\n| %s | ", view);
    const char *table = strstr(document, "\n| view | columns |"), *row = table ? strstr(table, start) : NULL;
    if (!row)
        return NULL;
    row += strlen(start);
    size_t length = strcspn(row, "\n"), n = 0;
    char *text = calloc(1, length + 1);
    int depth = 0;
    assert_non_null(text);
    for (size_t i = 0; i < length; i++) {
        depth += row[i] == '(';
        if (depth == 0 && row[i] != '|')
            text[n++] = row[i];
        depth -= row[i] == ')';
    }
    assert_int_equal(depth, 0);
    return text;
}

/* Words that can only be columns: those with a line below, and those that stand alone between commas. */
static struct columns of_document(const char *row)
{
    struct columns columns = {0};
    for (const char *part = row; *part;) {
        size_t length = strcspn(part, ",;:."), words = 0;
        for (size_t i = 0; i < length;) {
            size_t word = 0;
            while (i + word < length && is_of_name(part[i + word]))
                word++;
            if (word > 0 && memchr(part + i, '_', word))
                add(&columns, part + i, word);
            words += word > 0 || !isspace((unsigned char)part[i]);
            i += word ? word : 1;
        }
        size_t blank = strspn(part, " ");
        if (words == 1 && is_of_name(part[blank]) && !memchr(part, '_', length))
            add(&columns, part + blank, strcspn(part + blank, " ,;:."));
        part += length + (part[length] != '\0');
    }
    return columns;
}

static bool in_text(const char *text, const char *name)
{
    size_t length = strlen(name);
    for (const char *at = text; (at = strstr(at, name)); at += length)
        if ((at == text || !is_of_name(at[-1])) && !is_of_name(at[length]))
            return true;
    return false;
}

static void each_view_has_its_row(void **state)
{
    (void)state;
    static const char *const common[] = {"seq", "run", "utc", "id"};
    unsigned n_views = 0, n_columns = 0, n_wrong = 0;
    for (size_t v = 0; v < views_count; v++) {
        const char *view = views_schema[v].name;
        if (strcmp(views_schema[v].type, "view") != 0 || !views_has_kind(view))
            continue;
        struct columns made = of_view(views_schema[v].sql);
        char *row = row_of(view);
        if (!row)
            fail_msg("docs/ledger.md says nothing of the view %s", view);
        struct columns said = of_document(row);
        for (unsigned i = 0; i < made.n; i++) {
            bool is_common = false;
            for (size_t k = 0; k < sizeof common / sizeof *common; k++)
                is_common = is_common || strcmp(made.names[i], common[k]) == 0;
            if (!is_common && !in_text(row, made.names[i])) {
                printf("# %s.%s is not in docs/ledger.md\n", view, made.names[i]);
                n_wrong++;
            }
            n_columns++;
        }
        for (unsigned i = 0; i < said.n; i++)
            if (!has(&made, said.names[i])) {
                printf("# docs/ledger.md has %s.%s, which is no column\n", view, said.names[i]);
                n_wrong++;
            }
        assert_true(said.n > 0);
        free(row);
        n_views++;
    }
    printf("# figure %u views with %u columns are as docs/ledger.md says\n", n_views, n_columns);
    assert_true(n_views > 15 && n_columns > 200);
    assert_int_equal(n_wrong, 0);
}

static void each_row_has_its_view(void **state)
{
    (void)state;
    const char *row = strstr(document, "\n| view | columns |");
    assert_non_null(row);
    row = strstr(row + 1, "\n| ") + 1;
    for (; strncmp(row, "| ", 2) == 0; row = strchr(row, '\n') + 1) {
        char view[NAME_SIZE];
        snprintf(view, sizeof view, "%.*s", (int)strcspn(row + 2, " "), row + 2);
        if (!views_has_kind(view))
            fail_msg("docs/ledger.md has a row of %s, which is no view", view);
    }
}

static void the_format_has_its_number(void **state)
{
    (void)state;
    char words[64];
    snprintf(words, sizeof words, "`user_version` is\nthe format, %d;", VIEWS_FORMAT);
    assert_non_null(strstr(document, words));
}

int main(void)
{
    FILE *file = fopen("docs/ledger.md", "r");
    document = calloc(1, 1 << 20);
    if (!file || !document || fread(document, 1, (1 << 20) - 1, file) == 0)
        return 1;
    fclose(file);
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(each_view_has_its_row),
        cmocka_unit_test(each_row_has_its_view),
        cmocka_unit_test(the_format_has_its_number),
    };
    int failed = cmocka_run_group_tests_name("ledger_columns", tests, NULL, NULL);
    free(document);
    return failed;
}
