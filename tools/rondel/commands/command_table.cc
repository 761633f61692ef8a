#include <array>

#include "tools/rondel/commands/command.h"

// The one table of commands and flags. --help, shell completion, parsing and the README's block all
// come from it. A flag's value in capitals is a placeholder (FILE and FOLDER are completed as
// paths); words joined by '|' are the only ones allowed. The same holds for a command's words.
namespace rondel::app {
namespace {

constexpr std::array kNewFlags = {
    Flag{"--from", "VENUE", "Take the rig and what belongs to the robot from another venue."},
    Flag{"--marks", "", "With --from: take its marks too, where mirror and mount are the same."},
    Flag{"--name", "NAME", "The venue's name; without it the folder's."},
};

constexpr std::array kGrabFlags = {
    Flag{"--light", "NAME", "The light these frames belong to: a folder inside frames/."},
    Flag{"--count", "N", "How many frames at most; without it 12, of a folder all."},
    Flag{"--every", "SECONDS", "Time from one kept frame to the next, s; without it 0.5."},
};

constexpr std::array kTablesFlags = {
    Flag{"--verify", "", "Encode and decode every pixel, and hold it against the curve."},
};

constexpr std::array kRangeFlags = {
    Flag{"--tape", "", "Make marks from tape rows whose object is found; every second row checks."},
    Flag{"--model", "NAME", "Fit this model only; without it the best of all."},
};

constexpr std::array kCheckFlags = {
    Flag{"--batch", "FOLDER", "Check another folder's frames/ and tape.csv with this venue."},
    Flag{"--shard", "I/N", "Look at every Nth image only, and keep what was seen for --merge."},
    Flag{"--merge", "", "Join the kept shards to what one run over all images gives."},
    Flag{"--repair", "", "Refit only the cause that was found, into a copy, where that gains."},
};

constexpr std::array kRunFlags = {
    Flag{"--again", "", "Run every step, also those whose inputs have not changed."},
};

constexpr std::array kAdviseFlags = {
    Flag{"--count", "N", "How many marks to propose; without it 1."},
    Flag{"--goal", "worst|mean", "Lower the largest error over the range, or the mean one."},
    Flag{"--room-m", "METRES", "How far from the robot there is room to measure."},
};

constexpr std::array kPlaceFlags = {
    Flag{"--object", "NAME", "Take the height at which this object is seen."},
    Flag{"--height-mm", "H", "Take this height above the floor, mm; without either, the floor."},
    Flag{"--points", "FILE", "Read points from a CSV file, or from standard input with '-'."},
};

constexpr std::array kSendFlags = {
    Flag{"--baud", "RATE", "The port's rate, baud; without it the venue's link.baud."},
};

constexpr std::array kSceneFlags = {
    Flag{"--threads", "COUNT", "Threads to render with; all of the machine's when not given."},
};

constexpr std::array kDeskFlags = {
    Flag{"--host", "ADDRESS", "Listen on this address of this machine; without it 127.0.0.1 only."},
    Flag{"--port", "N", "Listen on this port; without it any free one."},
    Flag{"--no-open", "", "Print the address only; open no browser."},
};

constexpr std::span<const Flag> kNoFlags = {};

constexpr std::array kCommands = {
    Command{"new",
            "VENUE",
            "Start a venue: a folder with a venue.yaml and a rig.yaml to fill in.",
            kNewFlags,
            new_command},
    Command{"grab",
            "VENUE SOURCE",
            "Take frames from a camera device, a video, a stream address or a folder of images.",
            kGrabFlags,
            grab_command},
    Command{"centre", "VENUE", "Find the mirror's rim and centre.", kNoFlags, centre_command},
    Command{
        "mask", "VENUE", "Find what hides the floor: the robot itself.", kNoFlags, mask_command},
    Command{"range", "VENUE", "Fit the range curve to the marks.", kRangeFlags, range_command},
    Command{"colours",
            "VENUE",
            "Choose colour thresholds that hold in every light.",
            kNoFlags,
            colours_command},
    Command{
        "tables", "VENUE", "Make the tables that the boards carry.", kTablesFlags, tables_command},
    Command{"check",
            "VENUE",
            "Hold images against the tape sheet and give a verdict with reasons.",
            kCheckFlags,
            check_command},
    Command{
        "run", "VENUE", "Run every stale step in order, and the report.", kRunFlags, run_command},
    Command{"advise",
            "VENUE",
            "Say where to measure next, or when to stop.",
            kAdviseFlags,
            advise_command},
    Command{"at",
            "VENUE [U_PX V_PX]",
            "From a pixel to the floor: range and bearing with their band.",
            kPlaceFlags,
            at_command},
    Command{"where",
            "VENUE [RANGE_M BEARING_DEG]",
            "From the floor to a pixel.",
            kPlaceFlags,
            where_command},
    Command{"locate",
            "VENUE [IMAGE...]",
            "Find the objects in images, as the board would report them.",
            kNoFlags,
            locate_command},
    Command{"compare",
            "VENUE OTHER",
            "Say what changed between two venues or two results, in metres and in codes.",
            kNoFlags,
            compare_command},
    Command{"send",
            "VENUE PORT",
            "Load the tables onto a board over a serial port.",
            kSendFlags,
            send_command},
    Command{"scene",
            "SCENE OUT",
            "Render frames with known truth from a scene description.",
            kSceneFlags,
            scene_command},
    Command{"desk",
            "VENUE",
            "Open the workbench in a browser, served from this machine.",
            kDeskFlags,
            desk_command},
    Command{"completion",
            "bash|zsh|fish",
            "Print a completion script for a shell.",
            kNoFlags,
            completion_command},
};

}  // namespace

std::span<const Command> commands() { return kCommands; }

}  // namespace rondel::app
