/* Contacts: calls and sightings judged to come from one animal or party, what is known of where it is, and
 * what the permit's zones make of it. Plain data and rules on it; the watch owns the table. */
#ifndef RULE_CONTACT_H
#define RULE_CONTACT_H

#include "flow.h"
#include "rule/permit.h"
#include "rule/watch.h"
#include <stdbool.h>
#include <stdint.h>

#define CONTACT_MAX_CAUSES 8
#define CONTACT_MAX_KEPT 24

/* A call that a contact rests on, so that a sound which becomes known later can take it back. */
struct contact_call {
    uint32_t run, stream;
    uint64_t counter;
    int64_t known_ns, end_ns;
    double evidence; /* what is left of it */
};

struct contact {
    uint32_t number; /* in the ledger, from 1 */
    enum group group;
    enum contact_grade grade;
    enum contact_state state;
    uint32_t n_calls;
    bool seen;                    /* a person has sighted it */
    bool calf;                    /* with a calf */
    double animals;               /* the most that a person counted; 0: nobody has */
    char species[NOTE_NAME_SIZE]; /* as a person said last; empty: nobody has */
    int64_t first_ns, last_ns;    /* of its calls and sightings */
    double depth_m;               /* of the water now, where its clearance time depends on it; NAN: unknown */

    double evidence; /* log-odds at evidence_ns; they fade from there */
    int64_t evidence_ns;
    uint32_t n_kept; /* its newest calls, oldest first, without those that were taken back */
    struct contact_call kept[CONTACT_MAX_KEPT];
    bool forgot_calls;     /* it rests on older ones too */
    uint32_t n_taken_back; /* calls that proved to be sounds of no animal */
    double against;        /* log-odds that such sounds took from it */

    struct whereabouts where;
    int64_t where_ns; /* when a person said so */
    double bearing_deg, mirror_deg;
    enum bearing_from bearing_from;

    /* The last detection inside each zone, -1 for none: because a distance says so, or because the permit's
     * policy counts an unknown distance as inside. */
    int64_t stated_ns[PERMIT_MAX_ZONES], assumed_ns[PERMIT_MAX_ZONES];
    int64_t stated_before_ns[PERMIT_MAX_ZONES]; /* the one before, should the newest be corrected */
    bool sure; /* one of this episode's was inside by distance (P at least p_inside_act) or by policy */

    /* One episode lasts from when it first holds something back until it no longer does. */
    bool holding;
    bool asked;                /* put to the observer */
    bool delaying;             /* it holds a start back */
    int64_t countdown_ends_ns; /* of the observer; meaningful while asked and not passed */
    bool passed;               /* it has gone to the crew */
    bool confirmed;            /* by a verdict, in this episode */
    bool vouched;              /* in this episode an observer on watch sighted it or said where it is */
    int64_t word_ns;           /* when an observer on watch last vouched for it or confirmed it; -1 */
    enum permit_action order;  /* the strongest that went to the crew while the source sounded: it stays */

    int64_t said_ns;       /* watch time of its newest entry */
    char id[FLOW_ID_SIZE]; /* of its newest entry */
    uint32_t n_causes;     /* newest calls, sightings and verdicts */
    char causes[CONTACT_MAX_CAUSES][FLOW_ID_SIZE];
};

struct contacts {
    uint32_t n;    /* in order of their numbers */
    uint32_t made; /* so far, in this ledger */
    struct contact all[WATCH_MAX_CONTACTS];
};

/* A new contact at the end of the table. When there is no room, the oldest one that is neither open nor
 * holding anything back is forgotten; NULL when every one is. */
struct contact *contacts_add(struct contacts *contacts, enum group group, int64_t now_ns);
/* By number; NULL when unknown. */
struct contact *contacts_find(struct contacts *contacts, uint32_t number);
/* The newest contact of the group that a call or sighting at now_ns belongs to: not dismissed, and heard or
 * seen at most gap_ns ago. NULL when there is none. */
struct contact *contacts_near(struct contacts *contacts, enum group group, int64_t now_ns, int64_t gap_ns);

/* Log-odds at now_ns, faded with time constant decay_s. */
double contact_evidence(const struct contact *contact, int64_t now_ns, double decay_s);
/* Remembers a call that has added its evidence; the oldest is forgotten. */
void contact_keep_call(struct contact *contact, const struct event *event, int64_t end_ns);
/* Takes at most log_odds of what the call of that id added from the contact's evidence at now_ns; a call of
 * which nothing is left counts no more. Whether the contact rests on it. */
bool contact_take_back(struct contact *contact, uint32_t run, uint32_t stream, uint64_t counter,
                       double log_odds, int64_t now_ns, double decay_s);
/* The most evidence that it ever had, by the calls that are left; INFINITY when some were forgotten. */
double contact_most_evidence(const struct contact *contact, double decay_s);
/* Remembers what the contact rests on; the oldest is forgotten. */
void contact_add_cause(struct contact *contact, const char *id);

/* A detection at when_ns, wherever the contact is thought to be: marks the zones that it counts inside of. */
void contact_detect(struct contact *contact, const struct permit *permit, int64_t when_ns);
/* A person says where it was at when_ns. A distance outside a zone ends what was only assumed there, and
 * corrects what was stated for that very moment. */
void contact_place(struct contact *contact, const struct permit *permit, double distance_m, double log_spread,
                   int64_t when_ns);
/* Nothing of it counts inside any zone from now on. */
void contact_let_go(struct contact *contact);
/* Ends the episode: the next detection inside is asked about anew. */
void contact_end_episode(struct contact *contact);

/* When a zone is clear of it: the last detection inside and the group's clearance time; -1 for never
 * inside. */
int64_t contact_zone_clear_ns(const struct contact *contact, const struct permit *permit, uint32_t zone);
/* When all zones are; -1 where it is inside none at now_ns. Only an open contact of grade act counts. */
int64_t contact_clears_at_ns(const struct contact *contact, const struct permit *permit, int64_t now_ns);
/* Whether its start is held back by it: it is inside a zone that asks for a delay. */
bool contact_holds_start(const struct contact *contact, const struct permit *permit, int64_t now_ns);
/* Whether it counts inside only because an unanswered question about its distance does. */
bool contact_is_question(const struct contact *contact, const struct permit *permit, int64_t now_ns);
/* The strongest action that the zones which it is inside of ask for in a phase. */
enum permit_action contact_action(const struct contact *contact, const struct permit *permit,
                                  enum phase phase, int64_t now_ns);
/* The zone that asks for most of this contact: of those that it is inside of, else of those of its group.
 * NULL when the permit has no zone for it. */
const struct permit_zone *contact_zone(const struct contact *contact, const struct permit *permit,
                                       int64_t now_ns);
/* Whether, by the permit, being seen to leave ends the clearance time of its group. */
bool contact_leaving_ends(const struct contact *contact, const struct permit *permit);
/* The clearance time of its group, 0 where the permit has none. */
int64_t contact_clearance_ns(const struct contact *contact, const struct permit *permit);

/* What goes into its entry. */
struct contact_outcome contact_outcome(const struct contact *contact, const struct permit *permit,
                                       int64_t now_ns);
/* "contact 1, baleen whale, heard, distance unknown: counted as inside the mitigation zone". */
void contact_describe(const struct contact *contact, const struct permit *permit, int64_t now_ns,
                      char out[FLOW_TEXT_SIZE]);

#endif
