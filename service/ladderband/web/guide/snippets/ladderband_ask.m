function answer = ladderband_ask(path, body)
  % The text of the answer to a request; an error with the reason when the service refuses.
  url = getenv('LADDERBAND_URL');
  if isempty(url), url = 'http://127.0.0.1:8080'; end
  file = [tempname() '.json'];
  handle = fopen(file, 'w');
  fwrite(handle, jsonencode(body));
  fclose(handle);
  command = 'curl -sS --fail-with-body -H "Content-Type: application/json" -H "Prefer: wait=60"';
  if ~isempty(getenv('LADDERBAND_KEY'))  % through a pipe: a command line is seen by everybody
    key = 'printf ''header = "Authorization: Bearer %s"'' "$LADDERBAND_KEY" | ';
    command = [key command ' -K -'];
  end
  [status, answer] = system([command ' -d @' file ' "' url path '"']);
  delete(file);
  if status ~= 0, error('ladderband:refused', '%s', answer); end
end
