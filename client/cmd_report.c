#include "client/command.h"
const struct command command_report = {.name = "report",
                                       .synopsis = "FILE",
                                       .summary = "",
                                       .about = "",
                                       .least_words = 1,
                                       .most_words = 1};
