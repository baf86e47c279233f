/*
 * scenario.c - the course of the invented operation. Sizes of the answers are of the order that
 * textbooks of anaesthesia give (common practice); none is from a patient.
 */
#include "scenario.h"

#include <math.h>
#include <string.h>

struct line {
    const char *code;
    double at, span_s; /* at: share of the case */
    const char *value, *unit, *note;
    bool unstamped;
};

static const struct line script[] = {
    {"in-theatre", .020, 0, "", "", "", false},
    {"preoxygenation", .060, 140, "", "", "", false},
    {"fentanyl", .105, 0, "150", "ug", "", false},
    {"propofol", .125, 0, "160", "mg", "iv", false},
    {"unresponsive", .141, 0, "", "", "", false},
    {"rocuronium", .148, 0, "40", "mg", "", false},
    {"laryngoscopy", .176, 20, "", "", "", false},
    {"intubation", .184, 0, "", "", "first attempt", false},
    {"rate-set", .196, 0, "12", "/min", "", false},
    {"sevoflurane", .220, 0, "2.0", "%", "", false},
    {"antiemetic", .245, 0, "4", "mg", "ondansetron", false},
    {"flush", .310, 3, "", "", "", false},
    {"ephedrine", .335, 0, "10", "mg", "pressure 55", false},
    {"head-up", .370, 0, "", "", "", false},
    {"team-pause", .385, 0, "", "", "", false},
    {"incision", .400, 0, "", "", "navel", false},
    {"trocar", .415, 0, "", "", "camera", false},
    {"gas", .425, 960, "", "", "12 mm[Hg]", false},
    {"trocar", .450, 0, "", "", "second", false},
    {"trocar", .462, 0, "", "", "third", false},
    {"cautery", .520, 8, "", "", "", false},
    {"traction", .545, 30, "", "", "", false},
    {"cautery", .600, 5, "", "", "", false},
    {"cautery", .664, 11, "", "", "", false},
    {"clamp", .690, 6, "", "", "cystic artery", false},
    {"cautery", .722, 6, "", "", "", false},
    {"cautery", .741, 4, "", "", "", true},
    {"organ-out", .800, 0, "", "", "", false},
    {"washout", .815, 40, "", "", "", false},
    {"closure", .900, 0, "", "", "", false},
    {"sugammadex", .925, 0, "200", "mg", "", false},
    {"movement", .950, 0, "", "", "right hand", false},
    {"extubation", .965, 0, "", "", "", false},
    {"eyes-open", .972, 0, "", "", "", false},
};

/* Longest share of the case that a span may take, so that a short case keeps its order. */
static const double span_share = 0.4;

void scenario_init(struct scenario *scenario, double length_s)
{
    *scenario = (struct scenario){.length_s = length_s};
    for (size_t i = 0; i < sizeof script / sizeof *script; i++) {
        const struct line *line = &script[i];
        double span = line->span_s * fmin(1.0, length_s / 2400.0);
        scenario->list[scenario->count++] =
            (struct happening){.code = line->code,
                               .at_s = line->at * length_s,
                               .span_s = fmin(span, span_share * length_s),
                               .value = line->value,
                               .unit = line->unit,
                               .note = line->note,
                               .stamped = !line->unstamped};
    }
    scenario->gap_at_s = floor(.640 * length_s);
    scenario->gap_span_s = 14;
    scenario->lead_off_s = .570 * length_s;
    scenario->lead_on_s = scenario->lead_off_s + 24;
    scenario->flush_s = scenario_find(scenario, "flush")->at_s;
    scenario->flush_end_s = scenario->flush_s + scenario_find(scenario, "flush")->span_s;
    scenario->suppressed_s = .260 * length_s;
    scenario->awakened_s = .295 * length_s;
    scenario->induction_s = scenario_find(scenario, "propofol")->at_s;
    scenario->awake_s = scenario_find(scenario, "eyes-open")->at_s;
    scenario->apnoea_s = scenario_find(scenario, "unresponsive")->at_s;
    scenario->ventilated_s = scenario_find(scenario, "rate-set")->at_s;
    scenario->extubation_s = scenario_find(scenario, "extubation")->at_s;
}

const struct happening *scenario_find(const struct scenario *scenario, const char *code)
{
    for (size_t i = 0; i < scenario->count; i++)
        if (strcmp(scenario->list[i].code, code) == 0)
            return &scenario->list[i];
    return NULL;
}

bool scenario_during(const struct scenario *scenario, const char *code, double t_s)
{
    for (size_t i = 0; i < scenario->count; i++) {
        const struct happening *on = &scenario->list[i];
        if (t_s >= on->at_s && t_s < on->at_s + on->span_s && strcmp(on->code, code) == 0)
            return true;
    }
    return false;
}

static double smooth_step(double t_s, double middle_s, double width_s)
{
    return 1.0 / (1.0 + exp(-(t_s - middle_s) / width_s));
}

/* Rises to 1 at peak_s after it began, then fades. */
static double answer(double t_s, double began_s, double peak_s)
{
    double u = (t_s - began_s) / peak_s;
    return u <= 0 ? 0 : u * exp(1.0 - u);
}

static double answers(const struct scenario *scenario, const char *code, double t_s, double peak_s)
{
    double sum = 0;
    for (size_t i = 0; i < scenario->count; i++)
        if (strcmp(scenario->list[i].code, code) == 0)
            sum += answer(t_s, scenario->list[i].at_s, peak_s);
    return sum;
}

double scenario_depth(const struct scenario *scenario, double t_s)
{
    double asleep = smooth_step(t_s, scenario->induction_s + 35, 7);
    double awake = smooth_step(t_s, scenario->awake_s - 40, 18);
    double bolus = 0.25 * answer(t_s, scenario->induction_s + 20, 90);
    return fmin(1.0, asleep * (1.0 - awake) * (0.7 + bolus));
}

double scenario_arousal(const struct scenario *scenario, double t_s)
{
    return 0.25 * (1.0 - scenario_depth(scenario, t_s)) +
           0.9 * answers(scenario, "laryngoscopy", t_s, 35) +
           0.5 * answers(scenario, "intubation", t_s, 30) +
           0.7 * answers(scenario, "incision", t_s, 30) +
           0.3 * answers(scenario, "trocar", t_s, 20) +
           0.3 * answers(scenario, "traction", t_s, 25) +
           0.8 * answers(scenario, "movement", t_s, 15) +
           0.9 * answers(scenario, "extubation", t_s, 30);
}

double scenario_rate_bpm(const struct scenario *scenario, double t_s)
{
    return 64 + 14 * (1.0 - scenario_depth(scenario, t_s)) + 22 * scenario_arousal(scenario, t_s) +
           11 * answers(scenario, "ephedrine", t_s, 90) -
           6 * answers(scenario, "traction", t_s, 12);
}

double scenario_pressure_mmhg(const struct scenario *scenario, double t_s)
{
    double gas = smooth_step(t_s, scenario_find(scenario, "gas")->at_s + 30, 12);
    return 92 - 22 * scenario_depth(scenario, t_s) - 10 * answers(scenario, "propofol", t_s, 100) +
           22 * scenario_arousal(scenario, t_s) + 14 * answers(scenario, "ephedrine", t_s, 80) +
           5 * gas;
}
