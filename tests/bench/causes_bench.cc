#include <fmt/core.h>

#include <array>
#include <cstdlib>
#include <map>
#include <string>

#include "tests/calib/verdict/knock_trials.h"

// What the diagnosis makes of robots that were calibrated on `marks` marks with the drawing as
// prior and then knocked in one known way, from `rows` rows. Usage: causes_bench [RIGS] [ROWS]
// [MARKS] [SEED].
namespace rondel::verdict::trials {
namespace {

int number(int count, char** words, int at, int otherwise) {
  return count > at ? std::atoi(words[at]) : otherwise;
}

double percent(int part, int whole) { return 100.0 * part / whole; }

}  // namespace
}  // namespace rondel::verdict::trials

int main(int count, char** words) {
  using namespace rondel::verdict;
  using namespace rondel::verdict::trials;
  const int rigs = number(count, words, 1, 200);
  const int rows = number(count, words, 2, 10);
  const int marks = number(count, words, 3, 10);
  const auto seed = static_cast<std::uint32_t>(number(count, words, 4, 4711));
  fmt::print("{} rigs a knock, {} rows ({} px, {} mm), calibrated on {} marks, seed {}\n\n",
             rigs,
             rows,
             kPixelSd,
             1e3 * kTapeSdM,
             marks,
             seed);
  fmt::print("{:<12} {:>8} {:>8} {:>8} {:>9} {:>10}   named instead\n",
             "knock",
             "right",
             "open",
             "silent",
             "wrong",
             "oracle");
  for (std::size_t k = 0; k < kKindIds.size(); ++k) {
    const Kind kind = static_cast<Kind>(k);
    Tally tally;
    int oracle_right = 0;
    std::map<std::string, int> instead;
    for (int i = 0; i < rigs; ++i) {
      Dice dice(seed + 7919U * static_cast<std::uint32_t>(i) +
                104729U * static_cast<std::uint32_t>(k));
      const Trial trial = one_trial(kind, rows, marks, dice);
      const Diagnosis diagnosis = diagnose_rows(trial.calibrated, trial.rows);
      tally.add(judge_answer(diagnosis, kind));
      if (judge_answer(diagnosis, kind) == Answer::wrong) {
        std::string names;
        for (int c = 0; c < diagnosis.causes; ++c)
          names += " " + diagnosis.hypotheses[static_cast<std::size_t>(c)].id;
        ++instead[names];
      }
      if (kind != Kind::none) oracle_right += oracle(trial.calibrated, trial.rows) == kind ? 1 : 0;
    }
    std::string wrong;
    for (const auto& [names, n] : instead) wrong += fmt::format("{} x{};", names, n);
    fmt::print("{:<12} {:>6.1f} % {:>6.1f} % {:>6.1f} % {:>7.1f} % {:>8}   {}\n",
               kKindIds[k],
               percent(tally.right, rigs),
               percent(tally.undecided, rigs),
               percent(tally.silent, rigs),
               percent(tally.wrong, rigs),
               kind == Kind::none ? "-" : fmt::format("{:.1f} %", percent(oracle_right, rigs)),
               wrong);
  }

  fmt::print("\none wrong row among 20       named    alone    corrected\n");
  for (const double least_px : {kVisibleMistakePx, 0.0}) {
    int named = 0;
    int alone = 0;
    int corrected = 0;
    for (int i = 0; i < rigs; ++i) {
      Dice dice(seed + 15485863U + 7919U * static_cast<std::uint32_t>(i));
      const WrongRowTrial trial = one_wrong_row(20, marks, least_px, dice);
      const WrongRowAnswer answer =
          judge_wrong_row(trial, diagnose_rows(trial.calibrated, trial.rows));
      named += answer.named ? 1 : 0;
      alone += answer.alone ? 1 : 0;
      corrected += answer.corrected ? 1 : 0;
    }
    fmt::print("off by {:.1f} px or more      {:>6.1f} % {:>6.1f} % {:>6.1f} %\n",
               least_px,
               percent(named, rigs),
               percent(alone, rigs),
               percent(corrected, rigs));
  }

  fmt::print("\nrepair with 10 rows against recalibration on 10 marks, range RMS over the floor\n");
  fmt::print("{:<12} {:>10} {:>10} {:>12} {:>8}\n",
             "knock",
             "before",
             "repaired",
             "recalibrated",
             "ratio");
  for (std::size_t k = 1; k < kKindIds.size(); ++k) {
    const Kind kind = static_cast<Kind>(k);
    RepairErrors sum;
    for (int i = 0; i < rigs; ++i) {
      Dice dice(seed + 32452843U + 7919U * static_cast<std::uint32_t>(i) +
                104729U * static_cast<std::uint32_t>(k));
      sum.add(one_repair(kind, marks, dice));
    }
    fmt::print("{:<12} {:>8.2f} % {:>8.2f} % {:>10.2f} % {:>8.3f}\n",
               kKindIds[k],
               100.0 * sum.before(),
               100.0 * sum.repaired(),
               100.0 * sum.recalibrated(),
               sum.repaired() / sum.recalibrated());
  }
  return 0;
}
