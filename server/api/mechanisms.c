/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What is in the catalog: mechanisms, their revisions, reports and history, all read-only. */
#include <stdio.h>
#include <string.h>

#include "api.h"

static void put_mechanism(lwd_json *json, const lwd_catalog_mechanism *row)
{
    lwd_json_object(json);
    lwd_json_put_string(json, "mechanism", row->name);
    if (row->answering > 0) {
        lwd_json_put_int(json, "answering", row->answering);
        lwd_json_put_string(json, "digest", row->answering_digest);
    } else {
        lwd_json_put_null(json, "answering");
        lwd_json_put_null(json, "digest");
    }
    lwd_json_put_int(json, "revisions", row->revisions);
    lwd_json_put_int(json, "drafts", row->drafts);
    lwd_json_put_int(json, "published", row->published);
    lwd_json_put_int(json, "withdrawn", row->withdrawn);
    lwd_put_time(json, "created_at", row->created_ms);
    lwd_json_end(json);
}

void lwd_get_mechanisms(void *context, const lwd_request *request, lwd_reply *reply)
{
    lwd_app *app = context;
    lwd_catalog_mechanism row[LWD_PAGE_MAX];
    lwd_catalog_error err;
    lwd_page page;
    size_t n = 0;
    bool more = false;
    lwd_json json;
    if (!lwd_takes_json(reply, request) || !lwd_page_read(reply, request, &page)) {
        return;
    }
    if (strlen(page.cursor) > LWD_CATALOG_NAME_MAX) {
        page.cursor = "";
    }
    if (lwd_catalog_list_mechanisms(app->catalog, page.cursor, row, page.limit, &n, &more, &err)
        != LWD_CATALOG_OK) {
        lwd_fail_catalog(reply, request, &err);
        return;
    }
    lwd_reply_open(reply, &json, 200);
    lwd_json_object(&json);
    lwd_json_put_array(&json, "mechanisms");
    for (size_t i = 0; i < n; i++) {
        put_mechanism(&json, &row[i]);
    }
    lwd_json_end(&json);
    lwd_page_next(reply, request, &json, &page, more && n > 0, n > 0 ? row[n - 1].name : "");
    lwd_json_end(&json);
    lwd_reply_close(reply, request, &json);
}

/* Fetches the row of the mechanism in the path; false with a problem. */
static bool row_of(lwd_app *app, const lwd_request *request, lwd_reply *reply,
                   lwd_catalog_mechanism *row)
{
    const char *name = NULL;
    lwd_catalog_error err;
    if (!lwd_takes_json(reply, request) || !lwd_path_name(reply, request, &name)) {
        return false;
    }
    lwd_catalog_result result = lwd_catalog_get_mechanism(app->catalog, name, row, &err);
    if (result == LWD_CATALOG_NOT_FOUND) {
        lwd_fail_store(reply, request, LWD_STORE_NO_MECHANISM, &err);
    } else if (result != LWD_CATALOG_OK) {
        lwd_fail_catalog(reply, request, &err);
    }
    return result == LWD_CATALOG_OK;
}

void lwd_get_mechanism(void *context, const lwd_request *request, lwd_reply *reply)
{
    lwd_catalog_mechanism row;
    lwd_json json;
    char tag[64];
    if (!lwd_query_members(reply, request, NULL, NULL, 0)
        || !row_of(context, request, reply, &row)) {
        return;
    }
    /* The row changes with the state and with each new draft. It is no tag for If-Match: that one
     * is the tag of /state. */
    (void)snprintf(tag, sizeof tag, "mechanism-%lld-%lld", (long long)row.tag,
                   (long long)row.revisions);
    if (lwd_not_modified(reply, request, tag)) {
        return;
    }
    lwd_reply_open(reply, &json, 200);
    put_mechanism(&json, &row);
    lwd_reply_etag(reply, tag);
    lwd_reply_close(reply, request, &json);
}

void lwd_get_state(void *context, const lwd_request *request, lwd_reply *reply)
{
    lwd_catalog_mechanism row;
    lwd_json json;
    char tag[40];
    if (!lwd_query_members(reply, request, NULL, NULL, 0)
        || !row_of(context, request, reply, &row)) {
        return;
    }
    (void)snprintf(tag, sizeof tag, "state-%lld", (long long)row.tag);
    if (lwd_not_modified(reply, request, tag)) {
        return;
    }
    lwd_reply_open(reply, &json, 200);
    lwd_json_object(&json);
    lwd_json_put_string(&json, "mechanism", row.name);
    if (row.answering > 0) {
        lwd_json_put_int(&json, "answering", row.answering);
        lwd_json_put_string(&json, "digest", row.answering_digest);
    } else {
        lwd_json_put_null(&json, "answering");
        lwd_json_put_null(&json, "digest");
    }
    lwd_json_put_string(&json, "tag", tag);
    lwd_json_end(&json);
    lwd_reply_etag(reply, tag);
    lwd_reply_close(reply, request, &json);
}

static void put_revision(lwd_json *json, const lwd_catalog_revision_info *info)
{
    lwd_json_object(json);
    lwd_json_put_int(json, "revision", info->number);
    lwd_json_put_string(json, "digest", info->digest);
    lwd_json_put_string(json, "state", lwd_catalog_state_name(info->state));
    lwd_json_put_bool(json, "answers", info->answers);
    lwd_put_time(json, "created_at", info->created_ms);
    lwd_json_put_string(json, "created_by", info->created_by);
    lwd_json_end(json);
}

void lwd_get_revisions(void *context, const lwd_request *request, lwd_reply *reply)
{
    lwd_app *app = context;
    lwd_catalog_revision_info info[LWD_PAGE_MAX];
    lwd_catalog_mechanism row;
    lwd_catalog_error err;
    lwd_page page;
    lwd_json json;
    char cursor[24] = "";
    size_t n = 0;
    bool more = false;
    if (!lwd_page_read(reply, request, &page) || !row_of(app, request, reply, &row)) {
        return;
    }
    if (lwd_catalog_list_revisions(app->catalog, row.name, lwd_count_of(page.cursor), info,
                                   page.limit, &n, &more, &err) != LWD_CATALOG_OK) {
        lwd_fail_catalog(reply, request, &err);
        return;
    }
    lwd_reply_open(reply, &json, 200);
    lwd_json_object(&json);
    lwd_json_put_string(&json, "mechanism", row.name);
    lwd_json_put_array(&json, "revisions");
    for (size_t i = 0; i < n; i++) {
        put_revision(&json, &info[i]);
    }
    lwd_json_end(&json);
    if (n > 0) {
        (void)snprintf(cursor, sizeof cursor, "%lld", (long long)info[n - 1].number);
    }
    lwd_page_next(reply, request, &json, &page, more && n > 0, cursor);
    lwd_json_end(&json);
    lwd_reply_close(reply, request, &json);
}

/* The revision in the path with its texts; false with a problem. Clear it afterwards. */
static bool revision_of(lwd_app *app, const lwd_request *request, lwd_reply *reply,
                        lwd_catalog_revision *revision)
{
    const char *name = NULL;
    int64_t number = 0;
    lwd_catalog_error err;
    if (!lwd_query_members(reply, request, NULL, NULL, 0) || !lwd_takes_json(reply, request)
        || !lwd_path_name(reply, request, &name)
        || !lwd_path_revision(reply, request, 1, &number)) {
        return false;
    }
    lwd_catalog_result result =
        lwd_catalog_get_revision(app->catalog, name, number, revision, &err);
    if (result == LWD_CATALOG_NOT_FOUND) {
        lwd_catalog_mechanism row;
        bool known = lwd_catalog_get_mechanism(app->catalog, name, &row, NULL) == LWD_CATALOG_OK;
        lwd_fail_store(reply, request, known ? LWD_STORE_NO_REVISION : LWD_STORE_NO_MECHANISM,
                       &err);
    } else if (result != LWD_CATALOG_OK) {
        lwd_fail_catalog(reply, request, &err);
    }
    return result == LWD_CATALOG_OK;
}

void lwd_get_revision(void *context, const lwd_request *request, lwd_reply *reply)
{
    lwd_catalog_revision revision;
    if (!revision_of(context, request, reply, &revision)) {
        return;
    }
    if (!lwd_not_modified(reply, request, revision.info.digest)) {
        lwd_reply_etag(reply, revision.info.digest);
        lwd_reply_text(reply, request, 200, "application/json", revision.document,
                       revision.document_len);
    }
    lwd_catalog_revision_clear(&revision);
}

void lwd_get_report(void *context, const lwd_request *request, lwd_reply *reply)
{
    lwd_catalog_revision revision;
    if (revision_of(context, request, reply, &revision)) {
        lwd_reply_text(reply, request, 200, "application/json", revision.report,
                       revision.report_len);
        lwd_catalog_revision_clear(&revision);
    }
}

/* The catalog keeps accepted codes as one text, a blank between two. */
static void put_accepted(lwd_json *json, const char *accepted)
{
    lwd_json_put_array(json, "accepted");
    for (const char *p = accepted; *p != '\0';) {
        size_t n = strcspn(p, " ");
        lwd_json_string_len(json, p, n);
        p += n;
        p += strspn(p, " ");
    }
    lwd_json_end(json);
}

static void put_event(lwd_json *json, const lwd_catalog_event *event)
{
    lwd_json_object(json);
    lwd_json_put_int(json, "no", event->serial);
    lwd_json_put_int(json, "revision", event->number);
    lwd_json_put_string(json, "action", lwd_catalog_action_name(event->action));
    lwd_put_time(json, "at", event->at_ms);
    lwd_json_put_string(json, "by", event->who);
    lwd_json_put_string(json, "reason", event->reason);
    put_accepted(json, event->accepted);
    lwd_json_end(json);
}

enum { EVENTS_PER_PAGE = 50 }; /* an event is large: they stand on the stack */

void lwd_get_history(void *context, const lwd_request *request, lwd_reply *reply)
{
    lwd_app *app = context;
    lwd_catalog_event event[EVENTS_PER_PAGE];
    lwd_catalog_mechanism row;
    lwd_catalog_error err;
    lwd_page page;
    lwd_json json;
    char cursor[24] = "";
    size_t n = 0;
    bool more = false;
    if (!lwd_page_read(reply, request, &page) || !row_of(app, request, reply, &row)) {
        return;
    }
    size_t cap = page.limit < EVENTS_PER_PAGE ? page.limit : EVENTS_PER_PAGE;
    if (lwd_catalog_list_events(app->catalog, row.name, 0, lwd_count_of(page.cursor), event, cap,
                                &n, &more, &err) != LWD_CATALOG_OK) {
        lwd_fail_catalog(reply, request, &err);
        return;
    }
    lwd_reply_open(reply, &json, 200);
    lwd_json_object(&json);
    lwd_json_put_string(&json, "mechanism", row.name);
    lwd_json_put_array(&json, "events");
    for (size_t i = 0; i < n; i++) {
        put_event(&json, &event[i]);
    }
    lwd_json_end(&json);
    if (n > 0) {
        (void)snprintf(cursor, sizeof cursor, "%lld", (long long)event[n - 1].serial);
    }
    lwd_page_next(reply, request, &json, &page, more && n > 0, cursor);
    lwd_json_end(&json);
    lwd_reply_close(reply, request, &json);
}
