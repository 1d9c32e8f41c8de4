/* One typed line that says what was seen: "porpoise 320 m 045 closing". Words in any order, capitals or not,
 * commas or spaces between them:
 *
 *   a group                 porpoise, sperm whale, dolphins (delphinid), seal (phocid); plural or not
 *   a distance              320 m, 320m, 1.2 km, 0.5 nm (nautical miles of 1852 m: International
 * Extraordinary Hydrographic Conference, Monaco 1929) a bearing               045 (three digits), 45 deg,
 * bearing 45 how many                3, 2-5 (at least, at most), 2 calves, calf what they do closing,
 * opening, travelling ... (the words of the note's field `behaviour`); leaving how sure definite, probable,
 * possible which contact           contact 2 anything                after a colon: ": two fins"
 *
 * "at", "of", "and", "with", "a" say nothing. Pure: text in, fields of a note out. */
#ifndef RULE_MARK_LINE_H
#define RULE_MARK_LINE_H

#include "base/status.h"
#include "rule/note.h"

#define MARK_LINE_SENTENCE_SIZE 200

/* Sets the fields of *note that the line names, and its text to the whole line. On failure *note is untouched
 * and the sentence says which word is at fault and what would be allowed: STATUS_BAD_FORMAT,
 * STATUS_OUT_OF_RANGE. */
enum status mark_line_read(const char *line, struct note *note, char out_sentence[MARK_LINE_SENTENCE_SIZE]);

#endif
