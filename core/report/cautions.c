/* Cautions, usual ones (common practice, no source, but for the fracture case, which is published). The goal
 * of this code: one text wherever current is concerned. */
#include "core/report/cautions.h"

#include <string.h>

const char *const caution_heading =
    "Research software, no medical device, no claim of conformity to any standard. The stimulator's own "
    "certification, local codes and licensed practice come first.";

const struct caution cautions[] = {
    {"implants", "No implanted electronic device (pacemaker, defibrillator, pump, nerve stimulator)."},
    {"placement", "No current across the chest, the neck or the head."},
    {"pregnancy", "Not in pregnancy."},
    {"epilepsy", "Not with uncontrolled epilepsy."},
    {"denervation", "The muscle is not denervated."},
    {"thrombosis", "No thrombosis, known or suspected."},
    {"bone", "No unhealed fracture; with low bone density the torque is capped (a fracture is reported at 93 "
             "N m, knee locked at 90 degrees)."},
    {"skin", "The skin under the pads is whole and can feel; it is looked at before and after."},
    {"tumour", "No tumour nearby."},
    {"dysreflexia", "Spinal injury at or above T6: blood pressure is watched for autonomic dysreflexia; stop "
                    "on a rise of 20 mmHg with signs."},
    {"titration", "Strength is found from zero, at the bedside, on this day."},
    {"stop", "A hardware stop in series with the output is within reach; stop on pain, spasm, dizziness or "
             "any change of the skin. "
             "The program's stop is a request."},
};
const size_t cautions_count = sizeof cautions / sizeof cautions[0];

const struct caution *caution_of(const char *id)
{
    for (size_t i = 0; i < cautions_count; i++)
        if (strcmp(cautions[i].id, id) == 0) return &cautions[i];
    return NULL;
}
