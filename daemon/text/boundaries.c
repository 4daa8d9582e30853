#include "daemon/text/boundaries.h"

#include <unictype.h>
#include <unistring/version.h>
#include <uniwbrk.h>

/* The Word_Break property of the ASCII characters (WordBreakProperty.txt). */
enum word_break {
    OTHER = 0,
    LETTER,    /* ALetter */
    NUMERIC,   /* Numeric */
    CONNECTOR, /* ExtendNumLet: _ */
    MIDLETTER, /* MidLetter: : */
    MIDNUM,    /* MidNum: , ; */
    MIDNUMLET, /* MidNumLet and Single_Quote: . ' */
    SPACE,     /* WSegSpace */
    CR,
    LF
};

/* clang-format off */
static const unsigned char ascii_break[128] = {
    ['\n'] = LF, ['\r'] = CR, [' '] = SPACE, ['\''] = MIDNUMLET, ['.'] = MIDNUMLET,
    [','] = MIDNUM, [';'] = MIDNUM, [':'] = MIDLETTER, ['_'] = CONNECTOR,
    ['0'] = NUMERIC, ['1'] = NUMERIC, ['2'] = NUMERIC, ['3'] = NUMERIC, ['4'] = NUMERIC,
    ['5'] = NUMERIC, ['6'] = NUMERIC, ['7'] = NUMERIC, ['8'] = NUMERIC, ['9'] = NUMERIC,
    ['A'] = LETTER, ['B'] = LETTER, ['C'] = LETTER, ['D'] = LETTER, ['E'] = LETTER,
    ['F'] = LETTER, ['G'] = LETTER, ['H'] = LETTER, ['I'] = LETTER, ['J'] = LETTER,
    ['K'] = LETTER, ['L'] = LETTER, ['M'] = LETTER, ['N'] = LETTER, ['O'] = LETTER,
    ['P'] = LETTER, ['Q'] = LETTER, ['R'] = LETTER, ['S'] = LETTER, ['T'] = LETTER,
    ['U'] = LETTER, ['V'] = LETTER, ['W'] = LETTER, ['X'] = LETTER, ['Y'] = LETTER,
    ['Z'] = LETTER,
    ['a'] = LETTER, ['b'] = LETTER, ['c'] = LETTER, ['d'] = LETTER, ['e'] = LETTER,
    ['f'] = LETTER, ['g'] = LETTER, ['h'] = LETTER, ['i'] = LETTER, ['j'] = LETTER,
    ['k'] = LETTER, ['l'] = LETTER, ['m'] = LETTER, ['n'] = LETTER, ['o'] = LETTER,
    ['p'] = LETTER, ['q'] = LETTER, ['r'] = LETTER, ['s'] = LETTER, ['t'] = LETTER,
    ['u'] = LETTER, ['v'] = LETTER, ['w'] = LETTER, ['x'] = LETTER, ['y'] = LETTER,
    ['z'] = LETTER,
};
/* clang-format on */

static enum word_break break_of(char character)
{
    return (enum word_break)ascii_break[(unsigned char)character & 0x7f];
}

void boundaries_find(const char *text, size_t bytes, char *is_boundary)
{
    u8_wordbreaks((const uint8_t *)text, bytes, is_boundary);
}

size_t boundaries_ascii_end(const char *text, size_t bytes, size_t start)
{
    size_t at = start;
    enum word_break last = break_of(text[at++]);
    if (last == CR) {
        return at < bytes && text[at] == '\n' ? at + 1 : at; /* WB3 */
    }
    if (last == SPACE) {
        while (at < bytes && text[at] == ' ') { /* WB3d */
            at++;
        }
        return at;
    }
    if (last != LETTER && last != NUMERIC && last != CONNECTOR) {
        return at; /* WB999 */
    }
    while (at < bytes) {
        enum word_break next = break_of(text[at]);
        if (next == LETTER || next == NUMERIC || next == CONNECTOR) { /* WB5, 8-10, 13a, 13b */
            last = next;
            at++;
            continue;
        }
        enum word_break after = at + 1 < bytes ? break_of(text[at + 1]) : OTHER;
        bool joins_letters = next == MIDLETTER || next == MIDNUMLET; /* WB6, 7 */
        bool joins_numbers = next == MIDNUM || next == MIDNUMLET;    /* WB11, 12 */
        if ((last != LETTER || !joins_letters) && (last != NUMERIC || !joins_numbers)) {
            break;
        }
        if (after != last) {
            break;
        }
        at += 2;
    }
    return at;
}

const char *boundaries_property(int32_t point)
{
    static const char *const NAMES[] = {
        [WBP_OTHER] = "Other",
        [WBP_CR] = "CR",
        [WBP_LF] = "LF",
        [WBP_NEWLINE] = "Newline",
        [WBP_EXTEND] = "Extend",
        [WBP_FORMAT] = "Format",
        [WBP_KATAKANA] = "Katakana",
        [WBP_ALETTER] = "ALetter",
        [WBP_MIDNUMLET] = "MidNumLet",
        [WBP_MIDLETTER] = "MidLetter",
        [WBP_MIDNUM] = "MidNum",
        [WBP_NUMERIC] = "Numeric",
        [WBP_EXTENDNUMLET] = "ExtendNumLet",
        [WBP_RI] = "Regional_Indicator",
        [WBP_DQ] = "Double_Quote",
        [WBP_SQ] = "Single_Quote",
        [WBP_HL] = "Hebrew_Letter",
        [WBP_ZWJ] = "ZWJ",
        [WBP_WSS] = "WSegSpace",
    };
    int property = uc_wordbreak_property((ucs4_t)point);
    bool is_named = property >= 0 && (size_t)property < sizeof NAMES / sizeof NAMES[0];
    return is_named && NAMES[property] ? NAMES[property] : "Other";
}

bool boundaries_is_pictographic(int32_t point)
{
    return uc_is_property_extended_pictographic((ucs4_t)point);
}

int boundaries_version(void)
{
    return _libunistring_version;
}
