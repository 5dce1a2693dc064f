/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Fuzzes the reader of replay files (clients/cli/replay_file.h). For every question it accepts:
 *   - the path and the body for another revision can be made;
 *   - the answer expected compares equal to itself under the file's own rules;
 *   - the line written anew is accepted again and expects the same. */
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

#include "replay_file.h"

static void must(bool holds)
{
    if (!holds) {
        abort();
    }
}

static void check_rewritten(const lwc_replay_entry *entry, const lwc_compare_rules *rules)
{
    lwc_text text = {0};
    lwc_text why = {0};
    lwc_replay again;
    lwc_replay_entry other;
    cJSON *narrow = lwc_narrow(entry->expect, entry->expect);
    lwc_replay_write_head(&text);
    lwc_replay_rewrite(&text, entry, entry->status, narrow);
    must(lwc_replay_open(&again, text.data, text.len, &why));
    must(lwc_replay_next(&again, &other, &why) == 1);
    must(other.status == entry->status);
    must(strcmp(other.path, entry->path) == 0);
    must(lwc_compare(entry->expect, other.expect, rules, NULL, NULL) == 0);
    lwc_replay_entry_clear(&other);
    must(lwc_replay_next(&again, &other, &why) == 0);
    lwc_replay_close(&again);
    cJSON_Delete(narrow);
    lwc_text_clear(&text);
    lwc_text_clear(&why);
}

static void check_entry(const lwc_replay *replay, const lwc_replay_entry *entry)
{
    lwc_text path = {0};
    lwc_compare_rules rules;
    lwc_replay_path(&path, entry, "other", 7);
    must(lwc_starts(path.data, "/v1/mechanisms/other/"));
    cJSON *body = lwc_replay_body(entry, 7);
    must((body == NULL) == (entry->body == NULL));
    lwc_replay_rules(&rules, replay, entry, "ratio=0.5");
    must(lwc_compare(entry->expect, entry->expect, &rules, NULL, NULL) == 0);
    check_rewritten(entry, &rules);
    cJSON_Delete(body);
    lwc_text_clear(&path);
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);
int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    lwc_replay replay;
    lwc_replay_entry entry;
    lwc_text why = {0};
    bool open = lwc_replay_open(&replay, (const char *)data, size, &why);
    while (open && lwc_replay_next(&replay, &entry, &why) > 0) {
        check_entry(&replay, &entry);
        lwc_replay_entry_clear(&entry);
    }
    lwc_replay_close(&replay);
    lwc_text_clear(&why);
    return 0;
}
