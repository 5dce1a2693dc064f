/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The validation report of a revision as JSON: findings, mobility, limbs, modes, checks. Written
 * once when a document is stored and kept with it. */
#include <string.h>

#include "api.h"

static const char *severity_word(lw_severity severity)
{
    return severity == LW_ERROR ? "error" : severity == LW_WARNING ? "warning" : "note";
}

const char *lwd_limb_word(lw_limb_kind kind)
{
    static const char *const word[] = {"strut", "rail-rod", "crank-rod", "two-link", "wrist-arm",
                                       "general"};
    return (unsigned)kind < sizeof word / sizeof word[0] ? word[kind] : "general";
}

const char *lwd_motion_word(lw_motion motion)
{
    static const char *const word[] = {NULL,   "3T3R", "3T2R", "3T1R", "3T", "2T1R", "2T",
                                       "2R1T", "1T2R", "3R",   "2R",   "1R", "1T"};
    return (unsigned)motion < sizeof word / sizeof word[0] ? word[motion] : NULL;
}

static void put_finding(lwd_json *json, lw_severity severity, const char *code,
                        const char *pointer, const char *text, const char *expected,
                        const char *got)
{
    lwd_json_object(json);
    lwd_json_put_string(json, "severity", severity_word(severity));
    lwd_json_put_string(json, "finding", code);
    lwd_json_put_string(json, "pointer", pointer);
    lwd_json_put_string(json, "text", text);
    if (expected[0] != '\0') {
        lwd_json_put_string(json, "expected", expected);
    }
    if (got[0] != '\0') {
        lwd_json_put_string(json, "got", got);
    }
    lwd_json_end(json);
}

void lwd_findings_write(lwd_json *json, const lwd_findings *findings, const lw_report *report)
{
    lwd_json_put_array(json, "findings");
    for (size_t i = 0; i < findings->n; i++) {
        const lwd_finding *f = &findings->item[i];
        put_finding(json, f->severity, f->code, f->pointer, f->text, f->expected, f->got);
    }
    for (size_t i = 0; i < report->n_finding; i++) {
        const lw_finding *f = &report->finding[i];
        put_finding(json, f->severity, f->code, f->where, f->text, f->expected, f->got);
    }
    lwd_json_end(json);
}

void lwd_findings_join(lwd_findings *findings, const lw_report *report, lw_severity severity,
                       lw_severity as)
{
    for (size_t i = 0; i < report->n_finding; i++) {
        const lw_finding *from = &report->finding[i];
        if (from->severity != severity) {
            continue;
        }
        lwd_finding *to = lwd_findings_add(findings, as, from->code, from->where);
        if (to != NULL) {
            lwd_text_copy(to->text, sizeof to->text, from->text);
            lwd_text_copy(to->expected, sizeof to->expected, from->expected);
            lwd_text_copy(to->got, sizeof to->got, from->got);
        }
    }
}

static size_t count(const lwd_findings *findings, const lw_report *report, lw_severity severity)
{
    size_t n = 0;
    for (size_t i = 0; i < findings->n; i++) {
        n += findings->item[i].severity == severity ? 1 : 0;
    }
    for (size_t i = 0; i < report->n_finding; i++) {
        n += report->finding[i].severity == severity ? 1 : 0;
    }
    return n;
}

static void put_mobility(lwd_json *json, const lw_report *report, lwd_units units)
{
    lwd_json_put_object(json, "mobility");
    lwd_json_put_int(json, "computed", report->mobility);
    lwd_json_put_int(json, "counted", report->mobility_counted);
    lwd_json_put_int(json, "idle_spins", report->idle_spins);
    lwd_json_put_int(json, "spare_drives", report->redundancy_drives);
    lwd_json_put_int(json, "spare_freedoms", report->redundancy_kinematic);
    lwd_json_put_bool(json, "assumes_exact_geometry", report->assumes_exact_geometry);
    lwd_json_put_object(json, "closure");
    lwd_json_put_int(json, "rows", (int64_t)report->closure_rows);
    lwd_json_put_int(json, "rank", (int64_t)report->closure_rank);
    lwd_json_put_int(json, "unknowns", (int64_t)report->unknowns);
    lwd_json_put_number(json, "smallest_kept", report->rank_kept);
    lwd_json_put_number(json, "largest_dropped", report->rank_dropped);
    lwd_json_end(json);
    lwd_json_end(json);
    lwd_json_put_string(json, "motion", lwd_motion_word(report->motion));
    lwd_json_put_object(json, "characteristic_length");
    lwd_json_put_number(json, "value", lwd_length_out(units, report->characteristic_length_m));
    lwd_json_put_string(json, "unit", lwd_length_word(units));
    lwd_json_put_string(json, "from", report->length_from_document ? "document" : "geometry");
    lwd_json_end(json);
}

static void put_modes(lwd_json *json, const lw_report *report, const lwd_document *document)
{
    char text[LW_MODE_TEXT_SIZE];
    lwd_json_put_object(json, "modes");
    lw_mode_text(text, &report->home_mode);
    lwd_json_put_string(json, "default", text);
    lw_mode_text(text, &report->reference_mode);
    lwd_json_put_string(json, "reference", text);
    lwd_json_put_object(json, "named");
    for (size_t i = 0; i < report->n_mode_name && i < document->spec.n_mode; i++) {
        lw_mode_text(text, &report->mode_name[i]);
        lwd_json_put_string(json, document->spec.mode[i].name, text);
    }
    lwd_json_end(json);
    lwd_json_end(json);
}

static void put_limbs(lwd_json *json, const lw_report *report, const lw_spec *spec)
{
    lwd_json_put_array(json, "limbs");
    for (size_t i = 0; i < report->n_limb; i++) {
        const lw_limb_info *limb = &report->limb[i];
        lwd_json_object(json);
        lwd_json_put_int(json, "no", (int64_t)i + 1);
        lwd_json_put_string(json, "name", limb->name);
        lwd_json_put_string(json, "kind", lwd_limb_word(limb->kind));
        if (limb->branches > 0) {
            lwd_json_put_int(json, "branches", (int64_t)limb->branches);
        } else {
            lwd_json_put_null(json, "branches");
        }
        lwd_json_put_array(json, "drives");
        for (size_t k = 0; k < limb->n_drive && k < LW_MAX_DRIVES; k++) {
            lwd_json_string(json, spec->drive[limb->drive[k]].name);
        }
        lwd_json_end(json);
        lwd_json_put_string(json, "plus_means", limb->plus);
        lwd_json_end(json);
    }
    lwd_json_end(json);
    lwd_json_put_bool(json, "explicit_inverse", report->explicit_inverse);
}

/* Counts of the prepared solution sets and how they were proved. */
static void put_set(lwd_json *json, const char *key, const lw_set_info *set, const lw_spec *spec)
{
    if (!set->present) {
        lwd_json_put_null(json, key);
        return;
    }
    lwd_json_put_object(json, key);
    lwd_json_put_int(json, "solutions", (int64_t)set->solutions);
    lwd_json_put_string(json, "basis", set->closed ? "trace" : "saturated");
    lwd_json_put_int(json, "degree", (int64_t)set->degree);
    lwd_json_put_int(json, "paths", (int64_t)set->paths);
    lwd_json_put_array(json, "drives");
    for (size_t i = 0; i < set->n_drive; i++) {
        lwd_json_string(json, spec->drive[set->drive[i]].name);
    }
    lwd_json_end(json);
    lwd_json_end(json);
}

static void put_sets(lwd_json *json, const lw_report *report, const lw_spec *spec)
{
    lwd_json_put_object(json, "solution_sets");
    put_set(json, "forward", &report->forward_set, spec);
    put_set(json, "inverse", &report->inverse_set, spec);
    lwd_json_end(json);
}

static void put_checks(lwd_json *json, const lw_report *report, lwd_units units)
{
    lwd_json_put_object(json, "checks");
    lwd_json_put_int(json, "samples", (int64_t)report->samples);
    lwd_json_put_number(json, "worst_closure", report->worst_closure);
    lwd_json_put_number(json, "worst_derivative", report->worst_derivative);
    lwd_json_put_number(json, "worst_roundtrip",
                        lwd_length_out(units, report->worst_roundtrip_m));
    lwd_json_put_string(json, "roundtrip_unit", lwd_length_word(units));
    lwd_json_end(json);
}

bool lwd_report_write(lwd_buf *buf, const lwd_findings *findings, const lw_report *report,
                      const lwd_document *document, const char *digest)
{
    lwd_json json;
    lwd_json_init(&json, buf);
    lwd_json_object(&json);
    lwd_json_put_string(&json, "mechanism", document->spec.name);
    lwd_json_put_string(&json, "title", document->title);
    lwd_json_put_string(&json, "digest", digest);
    lwd_json_put_string(&json, "checked_by", "leewayd " LEEWAY_VERSION);
    lwd_json_put_int(&json, "warnings", (int64_t)count(findings, report, LW_WARNING));
    lwd_json_put_int(&json, "notes", (int64_t)count(findings, report, LW_NOTE));
    lwd_findings_write(&json, findings, report);
    if (findings->lost + report->findings_lost > 0) {
        lwd_json_put_int(&json, "findings_left_out",
                         (int64_t)(findings->lost + report->findings_lost));
    }
    put_mobility(&json, report, document->units);
    put_limbs(&json, report, &document->spec);
    put_sets(&json, report, &document->spec);
    put_modes(&json, report, document);
    put_checks(&json, report, document->units);
    lwd_json_end(&json);
    return lwd_json_done(&json);
}
