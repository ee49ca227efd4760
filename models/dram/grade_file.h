// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The text form of a grade; built-in grades are such files too (grades/*.grade). Kernel-free.
//
//     # up to the end of the line: a comment
//     grade     my-part                      its name
//     standard  "JESD79-4"
//     clock     1200MHz                      or a period: 0.625ns; or a fraction: 6400/3MHz
//     density   8 4 16                       Gbit that the file covers, the usual one first; then the same of
//     width     8 4 16                       data bits of a device
//     tRCD      14.16ns                      "Datasheet, Table 152"  read
//     tRTP      max(4nCK, 7.5ns)             "Datasheet, Table 92"   memory
//     tRFC      350ns  when density 8        ...
//     tFAW      30ns   when density 8 4 width 16
//     tRC       tRAS + tRP
//
// A line is a name, a value, a condition or none, and the value's source or none, which was `read` or is from
// `memory`. Of the lines of one name exactly one may hold for a device. A value in clocks is a number with a
// unit (nCK, or ps, ns, us, which are rounded each by itself), a name that stands further up, BL/2 for half
// the burst, the max( , ) of two values, or a sum or difference of those with blanks around the sign.
//
//     needed      bank-groups banks-per-group page (bytes of a row of one device) burst (beats)
//                 channel (data bits) CL CWL tRCD tRP tRAS tRC tRRD tFAW tCCD tWR tWTR tRTP read-to-write
//                 tREFI tRFC; tRRD, tCCD and tWTR alone or as tRRD_S and tRRD_L and so on
//     else        tRPab (else tRP) tCCD_L_WR (else tCCD_L) write-to-read-extra (else 0) rank-switch (else 2)
//                 tREFIpb tRFCpb (else no per-bank refresh) postponable (else 8)
//     rounding    exact (else), ddr4 or ddr5: see rounding.h
//     energy      part "datasheet", VDD VPP (V, mV), IDD0 IDD2N IDD3N IDD4R IDD4W IDD5B IPP0 IPP3N IPP5B (mA)
//
// The number of rows follows from density, page and banks.
#pragma once

#include <stdexcept>
#include <string>
#include <vector>

#include "earshot/dram/grade.h"

namespace earshot {

// what(): everything that is wrong, "ORIGIN:LINE: what", one a line.
class GradeError : public std::runtime_error {
 public:
  using std::runtime_error::runtime_error;
};

// The grade that `text` describes for a density and a device width, 0 for the usual ones. `origin` is the
// file's name in messages. Throws GradeError.
Grade parse_grade(const std::string& text, const std::string& origin, unsigned density_gbit = 0,
                  unsigned device_bits = 0);

// What a built-in grade or a user's file covers, the usual one first. Throws GradeError.
struct GradeRange {
  std::vector<unsigned> density_gbit, device_bits;
};
GradeRange grade_range(const std::string& name_or_path);

}  // namespace earshot
