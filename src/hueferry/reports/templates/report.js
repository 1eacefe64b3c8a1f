for (const divider of document.querySelectorAll('.divider')) {
  const handle = divider.querySelector('input');
  const place = () => divider.style.setProperty('--at', handle.value + '%');
  handle.addEventListener('input', place);
  place();
}
