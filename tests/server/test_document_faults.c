/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Single faults of a mechanism document, from tests/cases/faults/document.json: each is refused
 * with the right code at the right pointer, with a sentence, and alone. */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <cjson/cJSON.h>

#include "codec/document.h"
#include "lwt.h"

/* ---- making the fault ------------------------------------------------------------------------ */

/* The place a pointer names: the node that holds it, and the last part of the pointer. */
static cJSON *holder_of(cJSON *root, const char *pointer, char *last, size_t size)
{
    cJSON *node = root;
    const char *p = pointer;
    for (;;) {
        assert_int_equal(*p, '/');
        p++;
        size_t n = strcspn(p, "/");
        assert_true(n < size);
        memcpy(last, p, n);
        last[n] = '\0';
        p += n;
        if (*p == '\0') {
            return node;
        }
        node = cJSON_IsArray(node) ? cJSON_GetArrayItem(node, (int)strtol(last, NULL, 10))
                                   : cJSON_GetObjectItemCaseSensitive(node, last);
        if (node == NULL) {
            lwt_fail("'%s' is not in the base document", pointer);
        }
    }
}

static char *with_fault(const cJSON *base, const cJSON *fault)
{
    const cJSON *text = cJSON_GetObjectItemCaseSensitive(fault, "text");
    if (text != NULL) {
        char *copy = malloc(strlen(text->valuestring) + 1);
        assert_non_null(copy);
        memcpy(copy, text->valuestring, strlen(text->valuestring) + 1);
        return copy;
    }
    char last[64];
    cJSON *root = cJSON_Duplicate(base, true);
    const char *op = lwt_text(fault, "op");
    const char *path = lwt_text(fault, "path");
    cJSON *holder = holder_of(root, path, last, sizeof last);
    cJSON *value = NULL;
    if (strcmp(op, "remove") != 0) {
        value = cJSON_Duplicate(lwt_member(fault, "value"), true);
        assert_non_null(value);
    }
    if (cJSON_IsArray(holder)) {
        int i = (int)strtol(last, NULL, 10);
        assert_true(i < cJSON_GetArraySize(holder));
        assert_string_equal(op, "replace");
        assert_true(cJSON_ReplaceItemInArray(holder, i, value));
    } else {
        bool there = cJSON_GetObjectItemCaseSensitive(holder, last) != NULL;
        if (there == (strcmp(op, "add") == 0)) {
            lwt_fail("'%s' can not be done at '%s'", op, path);
        }
        if (strcmp(op, "remove") == 0) {
            cJSON_DeleteItemFromObjectCaseSensitive(holder, last);
        } else if (there) {
            assert_true(cJSON_ReplaceItemInObjectCaseSensitive(holder, last, value));
        } else {
            assert_true(cJSON_AddItemToObject(holder, last, value));
        }
    }
    char *out = cJSON_Print(root);
    assert_non_null(out);
    cJSON_Delete(root);
    return out;
}

/* ---- judging the refusal --------------------------------------------------------------------- */

static lwd_findings findings;

static bool right(const cJSON *fault, const lwd_document *doc)
{
    const cJSON *says = cJSON_GetObjectItemCaseSensitive(fault, "says");
    const cJSON *errors = cJSON_GetObjectItemCaseSensitive(fault, "errors");
    size_t want = errors != NULL ? (size_t)errors->valuedouble : 1;
    const lwd_finding *f = lwd_findings_first_error(&findings);
    return doc == NULL && f != NULL && findings.n_error == want &&
           strcmp(f->code, lwt_text(fault, "code")) == 0 &&
           strcmp(f->pointer, lwt_text(fault, "pointer")) == 0 &&
           (says == NULL || strstr(f->text, says->valuestring) != NULL) && strlen(f->text) >= 20 &&
           f->text[strlen(f->text) - 1] == (strstr(f->text, "(line ") != NULL ? ')' :
                                            strchr(f->text, '?') != NULL ? '?' : '.') &&
           (f->expected[0] != '\0' || strcmp(f->code, "no-memory") == 0);
}

static void refuses_every_single_fault_at_its_place(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("faults/document.json");
    cJSON *base = lwt_case_file(lwt_text(file, "base"));
    const cJSON *fault = NULL;
    size_t n = 0;
    size_t wrong = 0;
    cJSON_ArrayForEach(fault, lwt_member(file, "faults")) {
        char digest[LWD_DIGEST_SIZE];
        char *text = with_fault(base, fault);
        lwd_findings_init(&findings);
        lwd_document *doc =
            lwd_document_read_text(text, strlen(text), &findings, digest, NULL);
        if (!right(fault, doc)) {
            wrong++;
            print_message("%s: want %s at '%s', got %zu errors%s\n", lwt_text(fault, "fault"),
                          lwt_text(fault, "code"), lwt_text(fault, "pointer"), findings.n_error,
                          doc != NULL ? " and a document" : "");
            for (size_t i = 0; i < findings.n; i++) {
                print_message("    %s at '%s': %s [%s] [%s]\n", findings.item[i].code,
                              findings.item[i].pointer, findings.item[i].text,
                              findings.item[i].expected, findings.item[i].got);
            }
        }
        lwd_document_free(doc);
        cJSON_free(text);
        n++;
    }
    cJSON_Delete(base);
    cJSON_Delete(file);
    print_message("%zu single faults\n", n);
    assert_true(n >= 60);
    assert_int_equal(wrong, 0);
}

static void accepts_the_document_without_a_fault(void **state)
{
    (void)state;
    cJSON *base = lwt_case_file("faults/everything.json");
    lwd_findings_init(&findings);
    lwd_document *doc = lwd_document_read(base, &findings);
    for (size_t i = 0; i < findings.n; i++) {
        print_message("%s at %s\n", findings.item[i].text, findings.item[i].pointer);
    }
    assert_non_null(doc);
    assert_int_equal(findings.n, 0);
    lwd_document_free(doc);
    cJSON_Delete(base);
}

/* Every member of the document in turn becomes each kind of value: it is refused or it is read, and
 * nothing breaks. (The sanitizers watch.) */
static void survives_any_kind_of_value_at_any_place(void **state)
{
    (void)state;
    static const char *const kinds[] = {"null", "-1", "0.5", "\"x\"", "[1,2,3]", "{\"x\":1}"};
    cJSON *base = lwt_case_file("faults/everything.json");
    cJSON *stack[64];
    size_t refused = 0;
    size_t read = 0;
    for (size_t k = 0; k < sizeof kinds / sizeof kinds[0]; k++) {
        size_t depth = 1;
        stack[0] = base->child;
        while (depth > 0) {
            cJSON *node = stack[depth - 1];
            if (node == NULL) {
                depth--;
                continue;
            }
            stack[depth - 1] = node->next;
            cJSON *other = cJSON_Parse(kinds[k]);
            assert_non_null(other);
            cJSON saved = *node; /* swap the value, keep the place in the tree */
            node->type = (other->type & 0xff) | (saved.type & cJSON_StringIsConst);
            node->child = other->child;
            node->valuestring = other->valuestring;
            node->valuedouble = other->valuedouble;
            lwd_findings_init(&findings);
            lwd_document *doc = lwd_document_read(base, &findings);
            assert_true((doc == NULL) == (findings.n_error > 0));
            refused += doc == NULL ? 1 : 0;
            read += doc != NULL ? 1 : 0;
            lwd_document_free(doc);
            cJSON *next = node->next;
            cJSON *prev = node->prev;
            *node = saved;
            node->next = next;
            node->prev = prev;
            cJSON_Delete(other);
            if (node->child != NULL && depth < 64) {
                stack[depth++] = node->child;
            }
        }
    }
    print_message("%zu refused, %zu read\n", refused, read);
    assert_true(refused > 1500 && read > 100);
    cJSON_Delete(base);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(accepts_the_document_without_a_fault),
        cmocka_unit_test(refuses_every_single_fault_at_its_place),
        cmocka_unit_test(survives_any_kind_of_value_at_any_place),
    };
    return cmocka_run_group_tests_name("document_faults", tests, NULL, NULL);
}
