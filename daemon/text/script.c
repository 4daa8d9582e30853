#include "daemon/text/script.h"

#include <stddef.h>
#include <utf8proc.h>

struct range {
    int32_t first;
    int32_t last;
};

/* Rising. Whole planes 2 and 3 are set aside for ideographs. */
static const struct range ranges[] = {
    {0x3005, 0x3007},   /* iteration mark, closing mark, zero */
    {0x3021, 0x3029},   /* numerals */
    {0x3031, 0x3035},   /* vertical kana repeat marks */
    {0x3038, 0x303b},   /* numerals, vertical iteration mark */
    {0x3041, 0x3096},   /* Hiragana */
    {0x309d, 0x309f},   /* Hiragana iteration marks, digraph */
    {0x30a1, 0x30fa},   /* Katakana */
    {0x30fc, 0x30ff},   /* prolonged sound mark, Katakana iteration marks, digraph */
    {0x31f0, 0x31ff},   /* Katakana phonetic extensions */
    {0x3400, 0x4dbf},   /* Extension A */
    {0x4e00, 0x9fff},   /* unified ideographs */
    {0xf900, 0xfad9},   /* compatibility ideographs */
    {0xff66, 0xff9d},   /* half-width Katakana */
    {0x16fe3, 0x16fe3}, /* Old Chinese iteration mark */
    {0x1aff0, 0x1affe}, /* Minnan tones */
    {0x1b000, 0x1b167}, /* Kana supplement and extensions */
    {0x20000, 0x3fffd},
};

bool script_in_pairs(int32_t point)
{
    if (point < ranges[0].first) {
        return false;
    }
    for (size_t i = 0; i < sizeof ranges / sizeof ranges[0]; i++) {
        if (point <= ranges[i].last) {
            return point >= ranges[i].first;
        }
    }
    return false;
}

bool script_in_word(int32_t point)
{
    switch (utf8proc_category(point)) {
    case UTF8PROC_CATEGORY_LU:
    case UTF8PROC_CATEGORY_LL:
    case UTF8PROC_CATEGORY_LT:
    case UTF8PROC_CATEGORY_LM:
    case UTF8PROC_CATEGORY_LO:
    case UTF8PROC_CATEGORY_ND:
    case UTF8PROC_CATEGORY_NL:
    case UTF8PROC_CATEGORY_NO:
        return true;
    default:
        return false;
    }
}
