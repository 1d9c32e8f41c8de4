/* Names of the rejections. */
#include "call/found.h"

const char *rejection_text(enum rejection rejection)
{
    static const char *const names[REJECT_COUNT] = {
        [REJECT_TOO_WEAK] = "too weak",
        [REJECT_TOO_SHORT] = "too short",
        [REJECT_TOO_LONG] = "too long",
        [REJECT_STEADY_LINE] = "steady line",
        [REJECT_REVERBERATION] = "reverberation",
        [REJECT_BROADBAND] = "broadband",
        [REJECT_SHAPE] = "shape",
        [REJECT_NO_RHYTHM] = "no rhythm",
        [REJECT_MACHINE_RHYTHM] = "machine rhythm",
        [REJECT_OWN_SOURCE] = "own source",
        [REJECT_TOO_MANY] = "too many at once",
        [REJECT_PART_OF_ANOTHER] = "part of another call",
        [REJECT_ECHO] = "echo",
        [REJECT_TOO_HIGH] = "too high",
        [REJECT_NOT_SUDDEN] = "not sudden",
        [REJECT_LIKE_A_CALL] = "like a call",
        [REJECT_NOT_AN_ANIMAL] = "covered by what is no animal",
    };
    return (unsigned)rejection < REJECT_COUNT ? names[rejection] : "unknown";
}
