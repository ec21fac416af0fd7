#include "cli/program.h"

#include <fmt/format.h>

#include <array>
#include <opencv2/core/utility.hpp>

#include "base/version.h"
#include "cli/agree_command.h"
#include "cli/calibrate_command.h"
#include "cli/grade_command.h"
#include "cli/score_command.h"
#include "cli/sheet_command.h"

namespace laygauge {
namespace {

constexpr std::array kCommands{AddSheetCommand, AddScoreCommand, AddGradeCommand,
                               AddCalibrateCommand, AddAgreeCommand};

constexpr std::string_view kAbout =
    "laygauge scores the top surfaces of small printed coupons from a photograph.\n"
    "\n"
    "Print a sheet, lay a coupon into each of its wells, photograph it from above: every\n"
    "coupon gets a score from 1 to 10 with its uncertainty and the reasons, as a table.\n";

constexpr std::string_view kAfter =
    "\n"
    "Exit codes:\n"
    "  0   done\n"
    "  1   done in part: some photos were refused, the others were measured\n"
    "  2   wrong use of the command line\n"
    "  3   an input cannot be used\n"
    "  4   an output cannot be written\n"
    "  70  a bug in laygauge\n";

// OpenCV prints its errors itself; here they arrive as exceptions only.
int SilentOpenCv(int, const char*, const char*, const char*, int, void*) { return 0; }

int Parse(CLI::App& program, std::vector<std::string> arguments, const Terminal& terminal,
          bool& parsed) {
  try {
    std::reverse(arguments.begin(), arguments.end());  // CLI11 takes them from the end
    program.parse(std::move(arguments));
    parsed = true;
    return kExitDone;
  } catch (const CLI::Success& asked) {  // help or version
    return program.exit(asked, terminal.out, terminal.err);
  } catch (const CLI::ParseError& error) {
    const auto chosen = program.get_subcommands();
    const std::string command = chosen.empty() ? "" : " " + chosen.front()->get_name();
    const bool no_command = chosen.empty() && error.get_name() == "RequiredError";
    Complain(terminal, fmt::format("{}; see \"laygauge{} --help\"",
                                   no_command ? "no command was given" : error.what(), command));
    return kExitWrongUse;
  }
}

int RunChosen(const std::vector<std::string>& arguments, const Terminal& terminal) {
  CLI::App program(std::string(kAbout), "laygauge");
  program.footer(std::string(kAfter));
  program.set_version_flag("--version", fmt::format("laygauge {}", ProgramVersion()),
                           "print the version");
  program.set_help_flag("-h,--help", "print this help");
  program.require_subcommand(1);
  program.get_formatter()->label("SUBCOMMAND", "COMMAND");
  program.failure_message(CLI::FailureMessage::simple);
  std::vector<Command> commands;
  for (const AddCommand add : kCommands) {
    commands.push_back(add(program));
    commands.back().app->group("Commands (each has its own --help)");
  }
  bool parsed = false;
  const int code = Parse(program, arguments, terminal, parsed);
  if (!parsed) return code;
  for (const Command& command : commands) {
    if (command.app->parsed()) return command.run(terminal);
  }
  throw std::logic_error("a command without a function");
}

}  // namespace

int RunProgram(const std::vector<std::string>& arguments, const Terminal& terminal) {
  cv::redirectError(SilentOpenCv);
  try {
    const int code = RunChosen(arguments, terminal);
    if (terminal.out.flush()) return code;
    Complain(terminal, "standard output cannot be written");
    return kExitCannotWrite;
  } catch (const BadOption& bad) {
    Complain(terminal, bad.what());
    return kExitWrongUse;
  } catch (const std::bad_alloc&) {
    Complain(terminal, "there is not enough memory for this input");
    return kExitBadInput;
  } catch (const std::exception& bug) {
    Complain(terminal, fmt::format("a bug in laygauge: {}; please report it with the command line",
                                   bug.what()));
    return kExitBug;
  }
}

}  // namespace laygauge
