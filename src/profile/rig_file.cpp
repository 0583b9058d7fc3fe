#include "coldpin/profile/rig_file.h"

#include <algorithm>

#include <fmt/core.h>

#include "coldpin/signal/text_file.h"

#include "simulated_reader.h"
#include "simulated_rig_text.h"
#include "toml_reader.h"

namespace coldpin::profile {

namespace {

constexpr Range levels_dbu = {-100.0, 60.0};
constexpr Range losses_db = {-60.0, 140.0};
constexpr Range uncertainties_db = {0.0, 20.0};
constexpr int most_channels = 128;

// On a real interface a missing uncertainty would pass for none at all and make verdicts too sure.
double read_uncertainty(TableReader& table, std::string_view key, bool real) {
    return real ? table.need_number(key, uncertainties_db)
                : table.number(key, uncertainties_db).value_or(0.0);
}

void read_audio(TableReader& table, rig::AudioSetup& audio) {
    const std::string backend = table.need_choice("backend", {"portaudio", "simulated", "stored"});
    audio.backend = backend == "portaudio"
                        ? rig::BackendKind::portaudio
                        : (backend == "simulated" ? rig::BackendKind::simulated : rig::BackendKind::stored);
    audio.host_api = table.text("host_api").value_or("");
    const auto device = table.text("device");
    audio.output_device = table.text("output_device").value_or(device.value_or(""));
    audio.input_device = table.text("input_device").value_or(device.value_or(""));
    if (audio.backend == rig::BackendKind::portaudio && audio.output_device.empty())
        table.fail_missing("device", "the interface's name (coldpin devices lists them)");
    audio.sample_rate_hz = table.number("sample_rate_hz", {8000.0, 768000.0}).value_or(48000.0);
    audio.frames_per_buffer = static_cast<unsigned>(table.whole("frames_per_buffer", 0, 65536).value_or(0));
}

rig::Fixture read_fixture(TableReader& table, const std::string& name, bool real) {
    rig::Fixture fixture;
    fixture.name = table.text("name").value_or(name);
    fixture.differential_loss_db = table.need_number("differential_loss_db", losses_db);
    fixture.differential_loss_uncertainty_db =
        read_uncertainty(table, "differential_loss_uncertainty_db", real);
    fixture.common_mode_loss_db = table.number("common_mode_loss_db", losses_db).value_or(0.0);
    fixture.common_mode_loss_uncertainty_db =
        read_uncertainty(table, "common_mode_loss_uncertainty_db", real && table.has("common_mode_loss_db"));
    fixture.source_ohms = table.number("source_ohms", {0.0, 1e6}).value_or(150.0);
    fixture.rejection_limit_db = table.number("rejection_limit_db", {0.0, 200.0});
    return fixture;
}

void read_calibration(TableReader& table, rig::Setup& setup) {
    const bool real = setup.audio.backend == rig::BackendKind::portaudio;
    rig::Calibration calibration;
    calibration.output_full_scale_dbu = table.need_number("output_full_scale_dbu", levels_dbu);
    calibration.output_uncertainty_db = read_uncertainty(table, "output_uncertainty_db", real);
    calibration.common_mode_output_full_scale_dbu =
        table.number("common_mode_output_full_scale_dbu", levels_dbu);
    calibration.input_full_scale_dbu = table.need_number("input_full_scale_dbu", levels_dbu);
    calibration.input_uncertainty_db = read_uncertainty(table, "input_uncertainty_db", real);
    calibration.reference_full_scale_dbu = table.number("reference_full_scale_dbu", levels_dbu);
    calibration.time_utc = table.text("time_utc").value_or("");
    calibration.remark = table.text("remark").value_or("");
    calibration.knobs = table.text("knobs").value_or("");
    calibration.meter = table.text("meter").value_or("");
    calibration.loop_latency_frames = table.number("loop_latency_frames", {-1e6, 1e6});
    calibration.loop_noise_dbfs = table.number("loop_noise_dbfs", {-300.0, 20.0});
    calibration.loop_distortion_db = table.number("loop_distortion_db", {-300.0, 20.0});
    calibration.loop_deviation_db = table.number("loop_deviation_db", {0.0, 200.0});
    calibration.loop_crosstalk_db = table.number("loop_crosstalk_db", {-300.0, 40.0});
    calibration.loop_dc = table.number("loop_dc", {-1.0, 1.0});
    setup.calibration = calibration;
}

void read_simulated(TableReader& table, rig::SimulatedSetup& simulated) {
    simulated.seed = static_cast<unsigned long>(table.whole("seed", 0, 1000000000).value_or(1));
    simulated.real_time = table.flag("real_time").value_or(false);
    table.table("interface",
                [&](TableReader& part) { simulated.interface = read_simulated_interface(part); });
    table.table("preamp", [&](TableReader& part) { simulated.preamp = read_simulated_preamp(part); });
    table.table("faults", [&](TableReader& part) { simulated.faults = read_simulated_faults(part); });
}

void read_routing(TableReader& top, rig::Routing& routing) {
    top.table("outputs", [&](TableReader& table) {
        routing.differential_output = table.whole("differential", 1, most_channels).value_or(1);
        routing.common_mode_output = table.whole("common_mode", 1, most_channels);
        if (routing.common_mode_output == routing.differential_output)
            table.fail("common_mode", fmt::format("{}, the differential output", routing.differential_output),
                       "another output (leave the line out on a rig with one output)");
    });
    top.table("inputs", [&](TableReader& table) {
        auto device = table.whole_numbers("device", 1, most_channels);
        if (table.has("device") && device.empty())
            table.fail("device", "an empty list", "the input that hears the preamp");
        if (!device.empty()) routing.device_inputs = device;
        std::sort(device.begin(), device.end());
        const auto twice = std::adjacent_find(device.begin(), device.end());
        if (twice != device.end())
            table.fail("device", fmt::format("{} twice", *twice), "an input of its own for each channel");
        routing.reference_input = table.whole("reference", 1, most_channels);
        const auto& inputs = routing.device_inputs;
        if (routing.reference_input &&
            std::find(inputs.begin(), inputs.end(), *routing.reference_input) != inputs.end())
            table.fail("reference", fmt::format("{}, which hears the preamp", *routing.reference_input),
                       "another input (leave the line out when nothing is wired there)");
    });
}

void read_fixtures(TableReader& top, rig::Setup& setup) {
    const auto wanted = top.text("fixture");
    std::vector<std::string> names;
    std::vector<rig::Fixture> fixtures;
    top.named_tables("fixtures", [&](const std::string& name, TableReader& table) {
        names.push_back(name);
        fixtures.push_back(read_fixture(table, name, setup.audio.backend == rig::BackendKind::portaudio));
    });
    if (fixtures.empty())
        top.fail_missing("fixtures",
                         "[fixtures.NAME]: what sits between the interface's output and the preamp's input");
    const std::vector<std::string_view> known(names.begin(), names.end());
    if (!wanted && fixtures.size() > 1)
        top.fail_missing("fixture", "the one in use of " + listed(known) + ", such as fixture = \"NAME\"");
    const auto chosen = wanted ? std::find(names.begin(), names.end(), *wanted) : names.begin();
    if (chosen == names.end())
        top.fail("fixture", "'" + shown(*wanted) + "'", "the name of a [fixtures.NAME]: " + listed(known),
                 did_you_mean(*wanted, known));
    setup.fixture = fixtures[static_cast<std::size_t>(chosen - names.begin())];
    setup.fixture_key = *chosen;
}

}  // namespace

RigFile rig_from_text(const std::string& text, const std::string& source_name) {
    const toml::table document = parse_toml(text, source_name);
    TableReader top(document, source_name, "");
    read_schema(top, "rig", "a rig file");
    top.allow_only({"schema", "name", "temperature_c", "audio", "outputs", "inputs", "fixture", "fixtures",
                    "limits", "calibration", "simulated", "stored"});
    RigFile file;
    file.source_text = text;
    file.source_name = source_name;
    rig::Setup& setup = file.setup;
    setup.name = top.need_text("name");
    setup.temperature_c = top.number("temperature_c", {-40.0, 80.0}).value_or(20.0);
    if (!top.has("audio")) top.fail_missing("audio", "[audio] with its backend");
    top.table("audio", [&](TableReader& table) { read_audio(table, setup.audio); });
    read_routing(top, setup.routing);
    read_fixtures(top, setup);
    // A real preamp is never driven without a ceiling.
    if (setup.audio.backend == rig::BackendKind::portaudio && !top.has("limits"))
        top.fail_missing("limits", "[limits] with max_preamp_input_dbu, the level never to be exceeded");
    top.table("limits", [&](TableReader& table) {
        setup.limits.max_preamp_input_dbu = table.number("max_preamp_input_dbu", levels_dbu);
        if (setup.audio.backend == rig::BackendKind::portaudio && !setup.limits.max_preamp_input_dbu)
            table.fail_missing("max_preamp_input_dbu",
                               "the level never to be exceeded at the preamp's input");
        setup.limits.max_preamp_common_mode_dbu = table.number("max_preamp_common_mode_dbu", levels_dbu);
        setup.limits.max_preamp_output_dbu = table.number("max_preamp_output_dbu", levels_dbu);
    });
    top.table("calibration", [&](TableReader& table) { read_calibration(table, setup); });
    top.table("simulated", [&](TableReader& table) { read_simulated(table, setup.simulated); });
    top.table("stored", [&](TableReader& table) { setup.stored_folder = table.need_text("folder"); });
    if (setup.audio.backend == rig::BackendKind::stored && setup.stored_folder.empty())
        top.fail_missing("stored", "[stored] with the folder where the takes lie");
    return file;
}

RigFile read_rig(const std::string& name) {
    if (name == "simulated") return rig_from_text(simulated_rig_text, "simulated");
    const std::filesystem::path path(name);
    RigFile file = rig_from_text(signal::read_text_file(path), name);
    file.source_name = path.filename().string();
    if (file.setup.stored_folder.is_relative() && !file.setup.stored_folder.empty())
        file.setup.stored_folder = path.parent_path() / file.setup.stored_folder;
    return file;
}

}  // namespace coldpin::profile
