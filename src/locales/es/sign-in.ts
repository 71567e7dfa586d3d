export const signIn = {
  heading: 'Entrar',
  lead: 'Todos los ahumadores en un solo reloj, y horas de aviso antes de que una pieza pida manos.',
  email: 'Correo',
  password: 'Contraseña',
  submit: 'Entrar',
  busy: 'Entrando …',
  demo: {
    heading: 'Esta es la casa de prueba',
    body: 'Sus fuegos y su gente son simulados. Entra como uno de ellos:',
    enter: 'Entrar como {name}',
    password: 'La contraseña de todos: {password}',
  },
}
