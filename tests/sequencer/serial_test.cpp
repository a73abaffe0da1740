#include "sequencer/serial.hpp"

#include <doctest/doctest.h>

using namespace jigwright;

TEST_CASE("check characters of published examples") {
  // ORCID, "Structure of the ORCID Identifier" (ISO 7064 MOD 11-2): 0000-0002-1825-0097, 0000-0001-5109-3700,
  // 0000-0002-1694-233X.
  CHECK(check_characters(CheckDigit::iso7064_11_2, "0000-0002-1825-009") == "7");
  CHECK(check_characters(CheckDigit::iso7064_11_2, "0000-0001-5109-370") == "0");
  CHECK(check_characters(CheckDigit::iso7064_11_2, "0000-0002-1694-233") == "X");
  // ISO/IEC 7064's own examples, from memory: 0794 takes 0, 794 takes 44.
  CHECK(check_characters(CheckDigit::iso7064_11_2, "0794") == "0");
  CHECK(check_characters(CheckDigit::iso7064_97_10, "794") == "44");
  // GS1 check digit calculator's example, from memory: 6291041500213.
  CHECK(check_characters(CheckDigit::gs1_10, "629104150021") == "3");
  // ISBT 128 donation number of the standard's examples, from memory: G123498654321 takes H by MOD 37-2.
  CHECK(check_characters(CheckDigit::iso7064_37_2, "G123498654321") == "H");
}

TEST_CASE("every single wrong digit, and every swap of neighbours, fails MOD 11-2 and MOD 97-10") {
  for (const CheckDigit check : {CheckDigit::iso7064_11_2, CheckDigit::iso7064_97_10}) {
    const std::string body = "4071956";
    const std::string right = *check_characters(check, body);
    for (std::size_t at = 0; at < body.size(); ++at) {
      for (char digit = '0'; digit <= '9'; ++digit) {
        std::string wrong = body;
        wrong[at] = digit;
        CHECK((check_characters(check, wrong) == right) == (wrong == body));
      }
      if (at + 1 == body.size() || body[at] == body[at + 1]) continue;
      std::string swapped = body;
      std::swap(swapped[at], swapped[at + 1]);
      CHECK(check_characters(check, swapped) != right);
    }
  }
}

TEST_CASE("a scan is a serial, part of one, two together, misread, or something else") {
  const SerialForm plain{"TB3-####", CheckDigit::none};
  CHECK(fault_of(plain, "TB3-0001") == SerialFault::none);
  CHECK(fault_of(plain, "TB3-00") == SerialFault::too_short);
  CHECK(fault_of(plain, "TB3-0001TB3-0002") == SerialFault::two_together);
  CHECK(fault_of(plain, "4006381333931") == SerialFault::not_alike);
  CHECK(fault_of(plain, "") == SerialFault::not_alike);
  const SerialForm checked{"AB#####", CheckDigit::gs1_10};
  const std::string serial = "AB1234" + *check_characters(CheckDigit::gs1_10, "AB1234");
  CHECK(fault_of(checked, serial) == SerialFault::none);
  CHECK(fault_of(checked, "AB1243" + serial.substr(6)) == SerialFault::check_digit);
  CHECK(fault_of(checked, serial + serial) == SerialFault::two_together);
  CHECK(fault_of({"", CheckDigit::none}, "anything") == SerialFault::none);
}
