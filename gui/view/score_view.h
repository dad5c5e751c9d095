/* The score view: a muscle and a train that is edited by hand, predicted at once; or a plan, contraction by
 * contraction. */
#ifndef PULSEWRIGHT_GUI_VIEW_SCORE_VIEW_H
#define PULSEWRIGHT_GUI_VIEW_SCORE_VIEW_H
#include "core/document/plan_document.h"
#include "core/document/profile.h"
#include "core/document/stimulator.h"
#include "core/document/train_document.h"
#include "core/figure/figure.h"
#include "core/predict/predict.h"
#include "gui/widget/ui.h"

enum { SCORE_UNDO_MAX = 64 };
enum score_figure { SCORE_FIGURE_SCORE = 1, SCORE_FIGURE_SESSION, SCORE_FIGURE_LEDGER };

/* What is edited: plain data, so that undo is a copy. */
struct score_settings {
    double frequency_pps, duration_us, current_ma, ramp_up_ms, hold_ms, ramp_down_ms, rest_ms, contractions;
    int muscle, opening, pattern, shape; /* opening 0 single .. */
};

struct score_view {
    struct profile profile;
    struct plan plan;
    bool has_plan, has_stimulator, dark;
    struct stimulator stimulator;
    struct score_settings settings, undo[SCORE_UNDO_MAX], redo[SCORE_UNDO_MAX];
    size_t undos, redos;
    const char *muscle_names[PROFILE_MUSCLES_MAX + 1];
    struct train_pulse *pulses; /* owned */
    size_t pulse_count;
    struct trace trace; /* owned */
    struct trace_summary summary;
    bool predicted;
    char fault[MESSAGE_SIZE]; /* why there is no prediction */
    unsigned chosen;          /* contraction of the plan */
    double from_ms, to_ms;    /* shown */
    double *starts_ms;        /* of the plan's contractions, owned */
    size_t starts;
    char title[LINE_SIZE];
};

/* Takes over the profile; train, plan and stimulator may be NULL (plan: taken over). Free with
 * score_view_free. */
enum status score_view_init(struct score_view *view, struct profile *profile, const char *muscle,
                            const struct train *train, struct plan *plan, const struct stimulator *stimulator,
                            struct message *why);
void score_view_free(struct score_view *view);
/* One frame: takes the input in ui, predicts where something changed, fills the command list. */
void score_view_frame(struct score_view *view, struct ui *ui);
/* Draws one of the view's figures into a box of this size. */
void score_view_draw(const struct score_view *view, int figure, cairo_t *cairo, double width, double height,
                     double scale);

#endif
