mode = struct('wavenumber_initial_cm1', 992, 'wavenumber_final_cm1', 923, 'huang_rhys', 1.25);
request = struct('origin_cm1', 26650, 'modes', {{mode}}, 'tolerance', 0.01);  % {{ }}: a list of one
answer = jsondecode(ladderband_ask('/v1/lines', request));
for k = 1:numel(answer.lines.position_cm1)
  fprintf('%.1f %.6f %s\n', answer.lines.position_cm1(k), answer.lines.intensity(k), ...
          answer.lines.assignment{k});
end
fprintf('missing at most %.17g\n', answer.completeness.missing_at_most);

band = rmfield(request, 'tolerance');
band.axis = struct('unit', 'cm-1', 'start', 26000, 'stop', 31500, 'points', 551);
band.line_shape = struct('fwhm_cm1', 200);
handle = fopen('band.svg', 'w');
fwrite(handle, ladderband_ask('/v1/bands?format=svg&title=Band', band));
fclose(handle);
