#pragma once

// The HTTP library brings in a system header that makes a macro of a name Eigen uses.
#include <httplib.h>
#undef _res
