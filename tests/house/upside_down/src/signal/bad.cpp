// A deliberately wrong tree: the house test must refuse it.
#include "coldpin/measure/gain.h"
